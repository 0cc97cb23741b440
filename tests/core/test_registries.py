"""What is offered: each entry has its own key and title, sensible bounds, and works."""

import re
from string import Formatter

import numpy as np
import pytest
from numpy.testing import assert_allclose

from evalcore.candidates import CANDIDATES
from evalcore.choice import choose
from evalcore.estimated import ESTIMATORS
from evalcore.measures import MEASURES
from evalcore.plan import Plan
from evalcore.schemes import SCHEMES
from evalcore.sources import SOURCES
from evalcore.table import Roles

from .checks import carried_out, table_from

OFFERED = [
    pytest.param(entry, id=f"{what}-{key}")
    for what, registry in (("scheme", SCHEMES), ("candidate", CANDIDATES))
    for key, entry in registry.items()
]
SETTINGS = [
    pytest.param(setting, id=f"{key}-{setting.key}")
    for registry in (SCHEMES, CANDIDATES)
    for key, entry in registry.items()
    for setting in entry.settings
]


@pytest.mark.parametrize("registry", [SCHEMES, CANDIDATES, MEASURES])
def test_each_entry_stands_under_its_key(registry):
    assert [entry.key for entry in registry.values()] == list(registry)
    for key in registry:
        # keys are written on the command line, between colons, commas and equal signs
        assert re.fullmatch(r"[a-z][a-z0-9_]*", key)


@pytest.mark.parametrize("registry", [SCHEMES, CANDIDATES])
def test_titles_are_unique(registry):
    titles = [entry.title for entry in registry.values()]
    assert all(titles)
    assert len(set(titles)) == len(titles)


def test_names_of_measures_and_estimators_are_unique():
    for names in (
        [measure.plain for measure in MEASURES.values()],
        [measure.trade for measure in MEASURES.values()],
        list(ESTIMATORS.values()),
    ):
        assert all(names)
        assert len(set(names)) == len(names)


@pytest.mark.parametrize("entry", OFFERED)
def test_settings_of_an_entry_have_keys_of_their_own(entry):
    keys = [setting.key for setting in entry.settings]
    titles = [setting.title for setting in entry.settings]
    assert len(set(keys)) == len(keys)
    assert len(set(titles)) == len(titles)


@pytest.mark.parametrize("setting", SETTINGS)
def test_defaults_are_within_bounds_and_readable(setting):
    assert setting.title
    assert setting.check(setting.default) is None
    kinds = {"whole": int, "number": float, "yes_no": bool, "choice": str, "column": str}
    assert type(setting.default) is kinds[setting.kind]
    if setting.kind in ("whole", "number"):
        assert setting.low < setting.high
    if setting.kind == "choice":
        assert len(set(setting.choices)) == len(setting.choices) > 1
    if setting.kind == "column":
        # which columns there are is known with a table only
        assert setting.default == ""


@pytest.mark.parametrize("scheme", SCHEMES.values(), ids=SCHEMES)
def test_what_a_scheme_says_names_only_what_is_filled_in(scheme):
    fields = {name for _, name, _, _ in Formatter().parse(scheme.what) if name}
    known = {"n", "unit", "units"} | {setting.key for setting in scheme.settings}
    assert fields <= known
    # whole sentences; one that asks is answered by the figure
    assert re.search(r"[^\s.?][.?]$", scheme.what)
    assert scheme.what[0].isupper()


def test_only_the_bootstrap_repeats_cases():
    assert [key for key, scheme in SCHEMES.items() if scheme.repeats_cases] == ["bootstrap"]


def test_what_is_not_drawn_says_so():
    fixed = [key for key, scheme in SCHEMES.items() if not scheme.drawn]
    assert fixed == ["leave_one_out", "leave_block_out", "forward_in_time"]


def test_what_is_kept_together_is_named_by_a_column_setting():
    named = {key: scheme.keeps for key, scheme in SCHEMES.items() if scheme.keeps}
    assert named.pop("leave_block_out") == "column"
    assert named.pop("leave_one_out") == "keep"  # a setting it does not offer: units alone
    for key, name in named.items():
        (setting,) = [s for s in SCHEMES[key].settings if s.key == name]
        assert setting.kind == "column"
    assert SCHEMES["forward_in_time"].keeps == ""


def test_only_rules_that_look_at_no_feature_are_baselines():
    assert [key for key, entry in CANDIDATES.items() if entry.baseline] == ["majority"]


@pytest.mark.parametrize("key", CANDIDATES)
class TestEveryCandidate:
    def run(self, key, name, roles):
        table = table_from(name, roles)
        # whoever answers with the label itself is always right
        column = {"column": roles.label} if key == "present_practice" else {}
        plan = Plan(
            table.roles,
            (choose(SCHEMES, "bootstrap", rounds=2),),
            (choose(CANDIDATES, key, **column),),
        )
        evaluation, answers = carried_out(table, plan)
        return table, evaluation, answers["bootstrap", plan.candidate_names[0]]

    def test_on_iris(self, key):
        table, evaluation, answers = self.run(key, "iris.csv", Roles("class"))
        assert answers.scores.shape == (evaluation.rounds["bootstrap"].test.sum(), 3)
        assert np.isfinite(answers.scores).all()
        if key != "svm":
            assert_allclose(answers.scores.sum(axis=1), 1, rtol=1e-12)
        (name,) = evaluation.plan.candidate_names
        value = evaluation.estimate("accuracy", name).value
        # three equal classes: the rule that looks at nothing answers the first of them, one split
        # two of them
        low, high = {
            "majority": (0.15, 0.4),
            "one_feature": (0.5, 0.75),
            "present_practice": (1, 1),
        }.get(key, (0.85, 1))
        assert low <= value <= high
        assert evaluation.estimate("accuracy", name).n <= table.n_cases

    def test_on_text_and_missing_values(self, key):
        table, evaluation, answers = self.run(key, "penguins.csv", Roles("species"))
        assert np.isnan(table.features).any()
        assert np.isfinite(answers.scores).all()
        (name,) = evaluation.plan.candidate_names
        value = evaluation.estimate("balanced_accuracy", name).value
        # three classes: one answer is right for a third of them, one split for two thirds at most
        low, high = {
            "majority": (1 / 3, 1 / 3),
            "one_feature": (0.5, 2 / 3),
            "present_practice": (1, 1),
        }.get(key, (0.7, 1))
        assert low - 1e-12 <= value <= high + 1e-12


class TestSources:
    def test_citations(self):
        citations = [source.citation for source in SOURCES.values()]
        assert all(citations)
        assert len(set(citations)) == len(citations)

    def test_dois(self):
        for source in SOURCES.values():
            assert source.doi == "" or re.fullmatch(r"10\.\d{4,}/\S+", source.doi)

    def test_our_own_constructions_say_so(self):
        own = {key for key, source in SOURCES.items() if source.own}
        assert own
        assert own == {key for key in SOURCES if key.startswith("own_")}
        assert all(SOURCES[key].citation.startswith("own ") for key in own)

    def test_published_ones_carry_their_year(self):
        for key, source in SOURCES.items():
            year = re.search(r"\d{4}$", key)
            if year:
                assert f" {year[0]}, " in source.citation
