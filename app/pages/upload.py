"""Upload: which table, what its columns are for, and how many cases each class has."""

from importlib.resources import files

import streamlit as st

from app import charts, choices, look, state
from evalcore.errors import EvalError
from evalcore.findings import findings
from evalcore.intake import copies, make_table, noun_from
from evalcore.plan import Plan, recommended_candidates, recommended_schemes
from evalcore.profile import ColumnFacts, profile
from evalcore.sheet import Sheet
from evalcore.table import Copies, Roles, Table
from evalcore.wording import CASE, Noun, capitalised, count, listed, percent, quoted, reading

DEMO = "bean_lots.csv"
DEMO_ROLES = Roles(
    "verdict",
    "lot",
    (
        "producer",
        "harvest_year",
        "instrument",
        "operator",
        "days_to_certificate",
        "present_practice",
    ),
    Noun("lot", "lots"),
    "set_aside",
)
PREVIEW = 8


def take_file() -> None:
    """The drop area and the demo table; a file that cannot be read says why and changes nothing."""
    dropped = st.file_uploader(
        "CSV file: a header, then one line a case; at most 50 MB", type=["csv", "tsv", "txt"]
    )
    if st.button("Take the demo table", help="Bean lots of an invented testing laboratory"):
        state.keep_file((files("demo_data") / DEMO).read_bytes(), DEMO)
        state.set_choices(choices.of_roles(DEMO_ROLES))
    if dropped is None or not state.first_seen(dropped.file_id):
        return
    try:
        state.keep_file(dropped.getvalue(), dropped.name)
    except EvalError as error:
        st.error(look.safe(str(error)))


def choose_roles(sheet: Sheet) -> Roles:
    """Label, unit, noun, columns to leave out, and what happens to copies."""
    header = list(sheet.header)
    given = state.roles()
    if given is None or given.label not in header:
        given = Roles(_likely_label(sheet))
    st.header("What the columns are for", anchor=False)
    label_at, unit_at = st.columns(2)
    with label_at:
        label = st.selectbox(
            "Label: the class of each case",
            header,
            key=state.widget("label", given.label, allowed=header),
            persist_state="session",
        )
    units = ["", *[name for name in header if name != label]]
    with unit_at:
        unit = st.selectbox(
            "Unit: what is independent",
            units,
            key=state.widget("unit", given.unit if given.unit in units else "", allowed=units),
            persist_state="session",
            format_func=lambda name: name or "every row by itself",
            help="If a lot, a person or a log gave several rows, name the column that says which. "
            "Its rows are then never on both sides.",
        )
    options = [name for name in header if name not in (label, unit)]
    leave_out = st.multiselect(
        "Columns to leave out",
        options,
        key=state.widget("leave_out", list(given.leave_out), allowed=options),
        persist_state="session",
        help="Names, dates and everything that is not known when a new case is answered.",
    )
    noun = choose_noun(unit)
    roles = Roles(label, unit, tuple(leave_out), noun)
    return Roles(label, unit, tuple(leave_out), noun, choose_copies(sheet, roles))


def _likely_label(sheet: Sheet) -> str:
    """The last column with few different entries, else the last; only a first suggestion."""
    few = [n for n in sheet.header if 2 <= len(set(sheet.column(n))) <= 12]
    named = [n for n in few if n.lower() in ("label", "class", "species", "verdict", "target")]
    return (named or few or list(sheet.header))[-1]


def choose_noun(unit: str) -> Noun:
    """What one unit is called, where a unit was named."""
    if not unit:
        return CASE
    guess = noun_from(unit)
    one_at, many_at = st.columns(2)
    with one_at:
        one = st.text_input(
            "One unit is called",
            key=state.widget(f"noun_one {unit}", guess.singular),
            persist_state="session",
        )
    with many_at:
        many = st.text_input(
            "Several are called",
            key=state.widget(f"noun_many {unit}", guess.plural),
            persist_state="session",
        )
    return Noun(one.strip() or guess.singular, many.strip() or guess.plural)


def choose_copies(sheet: Sheet, roles: Roles) -> Copies:
    """Ask only where there are copies; with a unit they are set aside unless kept."""
    rows, units = copies(sheet, roles)
    if not rows and not units:
        return "keep"
    noun = roles.noun
    found = [f"{count(len(rows))} rows equal an earlier row"] if rows else []
    found += [f"{noun.counted(len(units))} equal another one, reading by reading"] if units else []
    kept: Copies = st.radio(
        look.safe(f"{capitalised(listed(found))}. They are"),
        ["set_aside", "keep"],
        key=state.widget(f"copies {roles.unit}", "set_aside" if roles.unit else "keep"),
        persist_state="session",
        format_func={"set_aside": "set aside", "keep": "kept"}.__getitem__,
        horizontal=True,
        help="A copy that is held out while its twin is trained on is answered by memory. But "
        "rounded readings of different cases may agree by chance.",
    )
    return kept


def read_sentence(table: Table) -> str:
    """What was read and what is judged on."""
    read = f"{count(table.rows_read)} rows were read"
    aside = [
        f"{table.noun.counted(part.units) if part.units else count(part.rows) + ' rows'} "
        f"({part.reason})"
        for part in table.set_aside
    ]
    judged = (
        table.noun.counted(table.n_units)
        if not table.has_units
        else f"{table.noun.counted(table.n_units)} with {count(table.n_cases)} rows"
    )
    if not aside:
        return f"{read}; they are {judged}."
    return f"{read}; they are {judged} once {listed(aside)} are set aside."


def show_table(table: Table) -> None:
    """Class balance first, then what is missing and what to ask about."""
    look.lead(read_sentence(table))
    look.figure(charts.class_balance(table), key="class-balance")
    plan = Plan(table.roles, recommended_schemes(table), recommended_candidates())
    st.header("What to look at before going on", anchor=False)
    look.findings(findings(table, plan), empty="Nothing in this table asks for attention.")
    facts = profile(table)
    notices = [f"{capitalised(notice)}" for notice in table.notices]
    if len(table.mixed_units):
        notices.append(
            f"{count(len(table.mixed_units))} {table.noun.plural} carry more than one class, so "
            "rows are counted, not " + table.noun.plural + "."
        )
    if notices:
        decisions = "1 decision" if len(notices) == 1 else f"{count(len(notices))} decisions"
        with st.expander(f"{decisions} while reading"):
            st.markdown("\n".join(f"- {look.safe(notice)}" for notice in notices))
    missing = [c for c in facts.columns if c.missing]
    label = (
        f"Missing values: {count(facts.incomplete_cases)} rows, {count(len(missing))} columns"
        if missing
        else "No values are missing"
    )
    with st.expander(f"{count(len(facts.columns))} features. {label}"):
        look.table(
            [
                {
                    "feature": c.name,
                    "kind": c.kind,
                    "missing": f"{count(c.missing)} ({percent(c.missing / table.n_cases, 1)})",
                    "different values": count(c.distinct),
                    "holds": _holds(c),
                }
                for c in facts.columns
            ],
            key="columns",
        )


def _holds(column: ColumnFacts) -> str:
    if column.kind == "number":
        return f"{reading(column.low)} to {reading(column.high)}"
    more = ", …" if len(column.categories) > 6 else ""
    return ", ".join(quoted(category) for category in column.categories[:6]) + more


def preview(sheet: Sheet) -> None:
    """The first rows as they were read."""
    with st.expander(f"Preview: the first rows of {count(len(sheet.rows))}"):
        look.table(
            [dict(zip(sheet.header, row, strict=True)) for row in sheet.rows[:PREVIEW]],
            key="preview",
        )


def main() -> None:
    """The page."""
    head = st.container()
    take_file()
    sheet = state.sheet()
    with head:
        look.page("Which table?", [("Table", state.source()[1])] if sheet else [])
    if sheet is None:
        st.write("No table yet. Drop a CSV file here, or take the demo table of bean lots.")
        return
    roles = choose_roles(sheet)
    state.keep_roles(roles)
    try:
        table = make_table(sheet, roles)
    except EvalError as error:
        st.error(look.safe(str(error)))
        preview(sheet)
        return
    show_table(table)
    preview(sheet)
    if st.button("Go on to Settings", type="primary"):
        st.switch_page("settings.py")


main()
