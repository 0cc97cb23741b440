"""How a cut-off is asked for: written and read, and what is refused."""

import dataclasses
import json
from datetime import date, timedelta

import pytest
from hypothesis import given
from hypothesis import strategies as st

from evalcore.cut_off_rule import CutOffRule
from evalcore.errors import PlanError

from .checks import exactly

OPEN = st.floats(0, 1, exclude_min=True, exclude_max=True)
COSTS = st.floats(0, exclude_min=True, allow_infinity=False)
OF_CLASS = st.text(min_size=1) | st.sampled_from(["a:b", "a:miss=1", "x=1,y", ":", "1", "ja, 2:1"])


@st.composite
def rules(draw):
    values = {}
    by = draw(st.sampled_from(["cost", "floor", "fixed"]))
    if by == "cost":
        values |= {"miss": draw(COSTS), "alarm": draw(COSTS)}
    elif by == "floor":
        values["floor"] = draw(OPEN)
    else:
        values["at"] = draw(st.floats(allow_nan=False, allow_infinity=False))
        values["set_on"] = draw(st.just("") | st.dates(max_value=date.today()).map(str))
    if draw(st.booleans()):
        values["share_low"], values["share_high"] = sorted([draw(OPEN), draw(OPEN)])
    if draw(st.booleans()):
        values["undecided_below"] = draw(st.floats(0.5, 1, exclude_min=True, exclude_max=True))
    return CutOffRule(draw(OF_CLASS), by, **values)


class TestRule:
    @given(rules())
    def test_round_trips(self, rule):
        assert CutOffRule.read(rule.written()) == rule
        assert CutOffRule(**json.loads(json.dumps(dataclasses.asdict(rule)))) == rule
        assert len({rule, CutOffRule.read(rule.written())}) == 1

    @pytest.mark.parametrize(
        ("text", "rule"),
        [
            ("f:miss=10", CutOffRule("f", "cost", miss=10)),
            ("f:alarm=0.5", CutOffRule("f", "cost", alarm=0.5)),
            (
                "f:miss=10,alarm=1,share=0.08",
                CutOffRule("f", "cost", miss=10, share_low=0.08, share_high=0.08),
            ),
            (
                "a:b:undecided=0.7,share=1e-05-2E-1,miss=2",
                CutOffRule(
                    "a:b", "cost", miss=2, share_low=1e-5, share_high=0.2, undecided_below=0.7
                ),
            ),
            ("f:floor=0.9,undecided=0", CutOffRule("f", "floor", floor=0.9)),
            (
                "f:at=0.35,set_on=2026-05-04",
                CutOffRule("f", "fixed", at=0.35, set_on="2026-05-04"),
            ),
            ("f:at=0", CutOffRule("f", "fixed")),
        ],
    )
    def test_read(self, text, rule):
        assert CutOffRule.read(text) == rule

    def test_written(self):
        rule = CutOffRule.read("a:b:undecided=0.70,share=0.05-0.20,miss=10.0")
        assert rule.written() == "a:b:miss=10,alarm=1,share=0.05-0.2,undecided=0.7"
        fixed = CutOffRule(
            "f", "fixed", at=0.35, set_on="2026-05-04", share_low=0.1, share_high=0.1
        )
        assert fixed.written() == "f:at=0.35,set_on=2026-05-04,share=0.1"

    def test_share_used(self):
        assert CutOffRule.read("f:miss=2").share_used(0.3) == 0.3
        assert CutOffRule.read("f:miss=2,share=0.08").share_used(0.3) == 0.08
        assert CutOffRule.read("f:miss=2,share=0.125-0.375").share_used(0.3) == 0.25

    def test_today_has_been_and_tomorrow_has_not(self):
        today = date.today()
        assert CutOffRule("f", "fixed", at=0.3, set_on=str(today)).set_on == str(today)
        # two days, should midnight pass between
        later = str(today + timedelta(days=2))
        message = f"`set_on` must be a date that has been; got {later}."
        with pytest.raises(PlanError, match=exactly(message)):
            CutOffRule("f", "fixed", at=0.3, set_on=later)

    def test_chosen_on_these_cases(self):
        texts = ("f:at=0.35", "f:at=0.35,set_on=2026-05-04", "f:miss=2", "f:floor=0.9")
        found = [CutOffRule.read(text).chosen_on_these_cases for text in texts]
        assert found == [True, False, False, False]


NO_SETTING = (
    "A cut-off has no setting 'recall'; it takes `miss`, `alarm`, `floor`, `at`, `set_on`, `share` "
    "or `undecided`."
)
ONE_OF_THREE = (
    "A cut-off takes costs (`miss`, `alarm`), a `floor` or a fixed `at`, exactly one of the three; "
)
SHARE = "`share` must lie strictly between 0 and 1, the lower end of a range first; got "
UNDECIDED = "`undecided` must be above 0.5 and below 1, or 0 for no case; got "


class TestErrors:
    @pytest.mark.parametrize(
        ("text", "message"),
        [
            ("failing", "A cut-off is written CLASS:name=value,...; got 'failing'."),
            (":miss=1", "A cut-off is written CLASS:name=value,...; got ':miss=1'."),
            ("a:b", "'b' in 'a:b' must be written name=value."),
            ("f:recall=1", NO_SETTING),
            ("f:miss=1,miss=2", "`miss` stands twice in 'f:miss=1,miss=2'; once is enough."),
            ("f:", ONE_OF_THREE + "got none in 'f:'."),
            ("f:set_on=2026-05-04", ONE_OF_THREE + "got none in 'f:set_on=2026-05-04'."),
            (
                "f:floor=0.9,miss=1,at=1",
                ONE_OF_THREE + "got `floor`, `miss` and `at` in 'f:floor=0.9,miss=1,at=1'.",
            ),
            ("f:miss=ten", "`miss` must be a number; got 'ten'."),
            ("f:miss=0", "`miss` must be above 0 and finite; got 0.0."),
            ("f:alarm=inf", "`alarm` must be above 0 and finite; got inf."),
            ("f:miss=nan", "`miss` must be above 0 and finite; got nan."),
            ("f:floor=1", "`floor` must lie strictly between 0 and 1; got 1."),
            ("f:floor=0", "`floor` must lie strictly between 0 and 1; got 0."),
            ("f:at=nan", "`at` must be finite; got nan."),
            ("f:miss=2,share=0", SHARE + "0."),
            ("f:miss=2,share=1", SHARE + "1."),
            ("f:miss=2,share=-0.1", SHARE + "-0.1."),
            ("f:miss=2,share=0.2-0.05", SHARE + "0.2 to 0.05."),
            ("f:miss=2,share=0-0.05", SHARE + "0 to 0.05."),
            ("f:miss=2,share=0.05-", "`share` must be a number; got '0.05-'."),
            ("f:miss=2,share=", "`share` must be a number; got ''."),
            ("f:miss=2,undecided=0.5", UNDECIDED + "0.5."),
            ("f:miss=2,undecided=1", UNDECIDED + "1.0."),
            ("f:miss=2,undecided=nan", UNDECIDED + "nan."),
            (
                "f:floor=0.9,set_on=2026-05-04",
                "`set_on` goes with a cut-off by fixed; got it with one by floor.",
            ),
            ("f:at=0.3,set_on=May", "`set_on` must be a date as YYYY-MM-DD; got 'May'."),
            ("f:at=0.3,set_on=20260504", "`set_on` must be a date as YYYY-MM-DD; got '20260504'."),
            (
                "f:at=0.3,set_on=9998-12-31",
                "`set_on` must be a date that has been; got 9998-12-31.",
            ),
        ],
    )
    def test_read(self, text, message):
        with pytest.raises(PlanError, match=exactly(message)):
            CutOffRule.read(text)

    @pytest.mark.parametrize(
        ("values", "message"),
        [
            (
                {"of_class": "", "by": "cost"},
                "A cut-off needs the class that is called from it up; got none.",
            ),
            (
                {"of_class": "f", "by": "youden"},
                "A cut-off is by cost, floor or fixed; got 'youden'.",
            ),
            (
                {"of_class": "f", "by": "floor", "floor": 0.9, "miss": 2.0},
                "`miss` goes with a cut-off by cost; got it with one by floor.",
            ),
            ({"of_class": "f", "by": "cost", "share_high": 0.2}, SHARE + "0 to 0.2."),
        ],
    )
    def test_made(self, values, message):
        with pytest.raises(PlanError, match=exactly(message)):
            CutOffRule(**values)
