"""Settings: what must be shown, how cases are held out, and which candidates answer."""

from typing import Any

import streamlit as st

from app import choices, look, state
from evalcore.answer import CAUTION, class_rate
from evalcore.candidates import CANDIDATES
from evalcore.errors import EvalError, PlanError
from evalcore.measures import MEASURES
from evalcore.plan import Plan, recommended_candidates, recommended_schemes
from evalcore.schemes import SCHEMES, Scheme
from evalcore.settings import Setting
from evalcore.table import Table
from evalcore.wording import (
    capitalised,
    count,
    duration,
    level,
    listed,
    quoted,
)

Values = dict[str, Any]
MANY_CLASSES = 6


def value_key(name: str, default: Any, **allowed: Any) -> str:
    """Key of a widget of this page, with a value behind it."""
    return state.widget(choices.PLAN + name, default, **allowed)


def ask_use(table: Table, values: Values) -> None:
    """What a future unit is answered from, and the acceptance limits."""
    st.header("What must be shown", anchor=False)
    values["answered_from"] = "all"
    if table.has_units:
        values["answered_from"] = ask_answered_from(table)
    concern_options = ["", *table.classes]
    values["concern"] = st.selectbox(
        "Class whose misses matter most",
        concern_options,
        key=value_key("concern", "", allowed=concern_options),
        persist_state="session",
        format_func=lambda name: name or "the smaller one of two, else none",
    )
    if table.n_classes > MANY_CLASSES:
        with st.expander(f"Acceptance limits for {table.n_classes} classes (optional)"):
            ask_limits(table, values)
    else:
        ask_limits(table, values)


def ask_answered_from(table: Table) -> str:
    """Whether a future unit is answered from all its rows or from one."""
    noun = table.noun
    options = ["one"] if len(table.mixed_units) else ["all", "one"]
    words = {"all": "all its readings together", "one": "one reading"}
    says = {
        "all": f"n counts {noun.plural}; the headline is by {noun.singular}",
        "one": f"the rate of single readings; {noun.plural} are still kept together",
    }
    chosen: str = st.radio(
        f"A future {look.safe(noun.singular)} will be answered from",
        options,
        key=value_key("answered_from", options[0], allowed=options),
        persist_state="session",
        format_func=words.__getitem__,
        captions=[look.safe(says[option]) for option in options],
    )
    return chosen


def ask_limits(table: Table, values: Values) -> None:
    """One optional limit a class, one for all, their confidence and date."""
    draft = Plan(table.roles, recommended_schemes(table), recommended_candidates(),
                 answered_from=values["answered_from"], concern=values["concern"])  # fmt: skip
    asked = [("sensitivity", name, class_rate(table, draft, name)) for name in table.classes]
    asked.append(("balanced_accuracy", "", "balanced accuracy"))
    for at in range(0, len(asked), 2):
        for column, (measure, name, words) in zip(st.columns(2), asked[at : at + 2], strict=False):
            with column:
                key = choices.limit_key(measure, name)
                values[key] = st.number_input(
                    f"Acceptance limit, {look.safe(words)}, in %",
                    min_value=1.0,
                    max_value=99.9,
                    step=1.0,
                    format="%g",
                    key=value_key(key, None),
                    persist_state="session",
                    placeholder="none",
                    help="The least share you must be able to show. From the rule you work under; "
                    "leave empty if there is none. Best set before looking at results.",
                )
    if not any(values.get(choices.limit_key(measure, name)) for measure, name, _ in asked):
        return
    left, right = st.columns(2)
    with left:
        values["confidence"] = st.number_input(
            "Confidence of the limits, one-sided, in %",
            min_value=80.0, max_value=99.9, step=1.0, format="%g",
            key=value_key("confidence", 95.0), persist_state="session",
        )  # fmt: skip
    with right:
        values["set_on"] = st.text_input(
            "Date the limits were set", key=value_key("set_on", ""), persist_state="session"
        )


def ask_schemes(table: Table, values: Values) -> None:
    """The scheme of the headline, further ones, and their settings."""
    recommended = recommended_schemes(table)
    st.header(look.safe(f"How {table.noun.plural} are held out"), anchor=False)
    keys = list(SCHEMES)
    values["first"] = st.radio(
        "First scheme (gives the headline)",
        keys,
        key=value_key("first", recommended[0].key, allowed=keys),
        persist_state="session",
        format_func=lambda key: SCHEMES[key].title,
        captions=[look.safe(caption(SCHEMES[key], table, recommended[0].key)) for key in keys],
    )
    others = [key for key in keys if key != values["first"]]
    values["second"] = st.pills(
        "Beside it, as a second look",
        others,
        selection_mode="multi",
        key=value_key("second", [choice.key for choice in recommended[1:]], allowed=others),
        persist_state="session",
        format_func=lambda key: SCHEMES[key].title,
        help="The bootstrap adds in-bag against out-of-bag scores, .632 and .632+.",
    )
    for key in (values["first"], *values["second"]):
        if SCHEMES[key].settings:
            with st.expander(look.safe(f"{SCHEMES[key].title}: {in_short(key)}")):
                ask_settings(key, SCHEMES[key].settings, values, table)


def caption(scheme: Scheme, table: Table, recommended: str) -> str:
    """One sentence on a scheme with this table's numbers, and whether it suits it."""
    defaults = {s.key: s.default for s in scheme.settings}
    sentence = scheme.what.format(
        unit=table.noun.singular, units=table.noun.plural, n=count(table.n_units), **defaults
    )
    if "column" in defaults:
        return f"{sentence} Choose its column below."
    rounds = scheme.n_rounds(table, defaults)
    cost = f" {count(rounds)} {'fit' if rounds == 1 else 'fits'} a candidate."
    first = f"Recommended for {table.noun.counted(table.n_units)}. "
    try:
        scheme.fit(table, defaults)
    except PlanError as error:
        return f"{sentence} As recommended it does not fit this table: {error}"
    return (first if scheme.key == recommended else "") + sentence + cost


def in_short(key: str) -> str:
    """The settings of a scheme or a candidate in a few words, for a closed row."""
    registry = SCHEMES if key in SCHEMES else CANDIDATES
    parts = []
    for setting in registry[key].settings:
        name = choices.setting(key, setting.key)
        value = state.choice(choices.PLAN + name, setting.default)
        if setting.kind == "yes_no":
            parts.append("stratified" if value else "not stratified")
        elif value != "":
            parts.append(f"{setting.key.replace('_', ' ')} {value}")
    return ", ".join(parts)


def ask_settings(key: str, settings: tuple[Setting, ...], values: Values, table: Table) -> None:
    """One widget a setting, its kind and bounds from the registry."""
    for at in range(0, len(settings), 2):
        for column, setting in zip(st.columns(2), settings[at : at + 2], strict=False):
            with column:
                name = choices.setting(key, setting.key)
                values[name] = ask_setting(setting, name, table)


def ask_setting(setting: Setting, name: str, table: Table) -> Any:
    """The widget of one setting."""
    if setting.kind == "column":
        columns = ["", *(c for c in table.entries if c != table.roles.label)]
        return st.selectbox(
            setting.title,
            columns,
            key=value_key(name, "", allowed=columns),
            persist_state="session",
            format_func=lambda column: column or "none",
        )
    key = value_key(name, setting.default)
    if setting.kind == "yes_no":
        return st.checkbox(setting.title, key=key, persist_state="session")
    if setting.kind == "choice":
        return st.radio(
            setting.title, setting.choices, key=key, persist_state="session", horizontal=True
        )
    number = int if setting.kind == "whole" else float
    return st.number_input(
        setting.title,
        min_value=number(setting.low),
        max_value=number(setting.high),
        step=1 if setting.kind == "whole" else None,
        format=None if setting.kind == "whole" else "%g",
        key=key,
        persist_state="session",
    )


def ask_candidates(table: Table, values: Values) -> None:
    """Who answers, with what settings, and whom the headline is about."""
    st.header("Candidates", anchor=False)
    recommended = [choice.key for choice in recommended_candidates()]
    values["candidates"] = st.pills(
        "Each answers for every case, on the same rounds",
        list(CANDIDATES),
        selection_mode="multi",
        key=value_key("candidates", recommended),
        persist_state="session",
        format_func=lambda key: CANDIDATES[key].title,
    )
    with_settings = [key for key in values["candidates"] if CANDIDATES[key].settings]
    if with_settings:
        with st.expander("Settings of the candidates"):
            for key in with_settings:
                st.markdown(f"**{capitalised(CANDIDATES[key].title)}**")
                ask_settings(key, CANDIDATES[key].settings, values, table)
    learned = [key for key in values["candidates"] if not CANDIDATES[key].baseline]
    options = ["", *learned]
    values["about"] = st.selectbox(
        "The answer is about",
        options,
        key=value_key("about", "", allowed=options),
        persist_state="session",
        format_func=lambda key: (
            CANDIDATES[key].title if key else "the first that learns from the features"
        ),
        help="Name it before looking at results: the best of several looks better than it is.",
    )


def ask_rest(values: Values) -> None:
    """Measure, level, random seed and the question."""
    with st.expander("Measure of the headline, confidence level, random seed, question"):
        measures = [key for key in MEASURES if key != "sensitivity"]
        left, right = st.columns(2)
        with left:
            values["measure"] = st.selectbox(
                "Measure on which candidates are set side by side",
                measures,
                key=value_key("measure", "balanced_accuracy", allowed=measures),
                persist_state="session",
                format_func=lambda key: MEASURES[key].trade,
            )
            values["seed"] = st.number_input(
                "Random seed",
                min_value=0, max_value=2**31, step=1,
                key=value_key("seed", 1), persist_state="session",
                help="The same table, settings and seed give the same digits again.",
            )  # fmt: skip
        with right:
            levels = [0.9, 0.95, 0.99]
            values["level"] = st.selectbox(
                "Confidence level of intervals, two-sided",
                levels,
                key=value_key("level", 0.95, allowed=levels),
                persist_state="session",
                format_func=level,
            )
        values["question"] = st.text_input(
            "The question, as it should stand on the summary",
            key=value_key("question", ""),
            persist_state="session",
            max_chars=300,
        )


def facts(table: Table) -> list[tuple[str, str]]:
    """The line under the title."""
    counts = table.class_counts("unit").tolist()
    by_class = ", ".join(f"{n} {c}" for n, c in zip(counts, table.classes, strict=True))
    left_out = listed([quoted(name) for name in table.left_out]) or "no column"
    return [
        ("Table", table.name),
        ("Counted by", f"{table.noun.singular}: {count(table.n_units)} ({by_class})"),
        ("Left out", left_out),
    ]


def evaluate(plan: Plan) -> None:
    """Start the evaluation and show it."""
    try:
        state.start(plan)
    except EvalError as error:
        st.error(look.safe(str(error)))
    else:
        st.switch_page("results.py")


def offer(table: Table, values: Values, place: Any) -> Plan | None:
    """What the settings come to, or why they make no plan; at the top of the page."""
    with place:
        try:
            plan = choices.plan_of(values, table)
            plan.check(table)
        except EvalError as error:
            st.error(look.safe(str(error)))
            return None
        fits = plan.fits(table)
        look.lead(
            f"As set: {len(plan.candidates)} candidates, each answering for every "
            f"{table.noun.singular} while it is held out, {count(fits)} fits, "
            f"{duration(plan.seconds(table) / 2)}."
        )
        with st.container(horizontal=True):
            if st.button("Evaluate", type="primary", key="evaluate-top"):
                evaluate(plan)
            if st.button("Back to the recommended settings"):
                state.forget_choices(choices.PLAN)
                st.rerun()
    return plan


def say_what_stays_behind() -> None:
    """What the evaluation at hand was asked for that this page has no widget for."""
    try:
        record = state.record()
        left = choices.not_carried_over(record.plan) if record else ()
    except EvalError:
        return
    if left:
        look.soft(
            f"The evaluation at hand was asked on the command line for {listed(left)}. An "
            "evaluation started here leaves that out."
        )


def main() -> None:
    """The page."""
    table = state.table()
    look.page("Settings", facts(table) if table else [])
    if table is None:
        st.write("No table yet: choose one first, and the column that holds the class.")
        if st.button("Go to Upload", type="primary"):
            st.switch_page("upload.py")
        return
    place, values = st.container(), Values()
    say_what_stays_behind()
    ask_use(table, values)
    ask_schemes(table, values)
    ask_candidates(table, values)
    ask_rest(values)
    plan = offer(table, values, place)
    if plan and st.button("Evaluate", type="primary", key="evaluate-foot"):
        evaluate(plan)
    look.caution(CAUTION)


main()
