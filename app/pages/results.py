"""Results: the answer first, then what to weigh, how sure it is and why it varies."""

import streamlit as st

from app import charts, look, state
from evalcore import evidence_quoted
from evalcore.answer import CAUTION, answer, best_sentence, class_rate, scheme_in_words, title
from evalcore.beside_answer import beside_in_sentences
from evalcore.checks_models import why_632_misleads
from evalcore.engine import chunk_rounds
from evalcore.errors import EvalError
from evalcore.evaluation import Evaluation
from evalcore.findings import findings
from evalcore.limit_rows import limit_rows
from evalcore.record import Record, Status
from evalcore.schemes import SCHEMES
from evalcore.summary import ESTIMATE_HEADER, estimate_rows
from evalcore.verdict import verdicts_in_use
from evalcore.wording import count, duration, n_equals, with_interval

PROGRESS_EVERY, FIGURES_EVERY = 1.0, 3.0


def nothing_yet() -> None:
    """The empty page says where to go."""
    look.page("Results")
    st.write("No evaluation yet. Choose a table and settings, then Evaluate.")
    if st.button("Go to Settings", type="primary"):
        st.switch_page("settings.py")


def progress(record: Record) -> None:
    """How far it has come, with a button to cancel; leaves the live page once it has ended."""
    state.notice_ended()
    try:
        status = record.status()
    except EvalError as error:
        st.error(look.safe(str(error)))
        return
    if status.state not in state.LIVE:
        st.rerun()
    left = f", {duration(status.seconds_left)} left" if status.seconds_left else ""
    st.progress(
        status.done / status.total,
        text=f"{count(status.done)} of {count(status.total)} rounds finished{left}.",
    )
    if record.cancelled():
        st.write("Cancelling; what has finished is kept.")
    elif st.button("Cancel"):
        record.cancel()
        st.rerun(scope="fragment")


def ended_early(record: Record, status: Status) -> None:
    """An evaluation that did not finish: say why, offer to go on."""
    rounds = f"{count(status.done)} of {count(status.total)} rounds had finished and are kept."
    says = {
        "cancelled": f"This evaluation was cancelled; {rounds}",
        "interrupted": f"This evaluation was interrupted; {rounds}",
        "failed": f"This evaluation failed. {status.message} {rounds}",
    }
    st.warning(look.safe(says[status.state]))
    if st.button("Go on from the finished rounds", type="primary"):
        state.go_on(record)
        st.rerun()


def facts(record: Record, evaluation: Evaluation) -> list[tuple[str, str]]:
    """The line under the title."""
    table, plan = evaluation.table, evaluation.plan
    return [
        ("Table", f"{table.name}, {table.noun.counted(table.n_units)}"),
        ("Candidate", plan.title(evaluation.about)),
        ("Scheme", scheme_in_words(plan, table, evaluation.scheme)),
        ("Record", f"{record.name} ({record.about['begun']})"),
    ]


def how_sure(evaluation: Evaluation) -> None:
    """Every candidate on one axis, then each class of the one the answer is about."""
    st.header("How sure", anchor=False)
    measure = evaluation.plan.measure
    look.figure(charts.estimates_with_intervals(evaluation, measure), key="estimates")
    for said in (evidence_quoted.sentence(evaluation), best_sentence(evaluation)):
        if said:
            look.soft(said)
    if measure != "accuracy":
        look.figure(charts.estimates_with_intervals(evaluation, "accuracy"), key="share-right")
    bounds = {
        v.limit.of_class: v.at_least
        for v in verdicts_in_use(evaluation, evaluation.about)
        if v.limit.of_class
    }
    look.figure(charts.per_class(evaluation, evaluation.about, bounds=bounds), key="classes")


def beside(evaluation: Evaluation) -> None:
    """What was asked for beside the estimates, in sentences."""
    said = beside_in_sentences(evaluation)
    if said:
        st.header("Settings picked, cut-off, more cases, chance", anchor=False)
        for sentence in said:
            st.write(look.safe(sentence))


def why_it_varies(evaluation: Evaluation) -> None:
    """Histograms of single rounds, and in-bag against out-of-bag scores."""
    st.header("Why it varies", anchor=False)
    schemes = list(evaluation.rounds)
    look.figure(charts.round_scores(evaluation, schemes[0]), key="rounds")
    bootstrap = [s for s in schemes if SCHEMES[evaluation.plan.scheme(s).key].repeats_cases]
    shown = (bootstrap or schemes)[0]
    trusted = frozenset(
        name
        for name in evaluation.candidates
        if bootstrap and why_632_misleads(evaluation, name, shown) is None
    )
    look.figure(charts.in_and_out(evaluation, shown, plus_632=trusted), key="in-and-out")
    for scheme in schemes[1:]:
        words = scheme_in_words(evaluation.plan, evaluation.table, scheme)
        with st.expander(look.safe(f"Single rounds of the other scheme: {words}")):
            look.figure(charts.round_scores(evaluation, scheme), key=f"rounds-{scheme}")
    if bootstrap and shown != schemes[0]:
        with st.expander("Training and held-out scores of the first scheme"):
            look.figure(charts.in_and_out(evaluation, schemes[0]), key="in-and-out-first")


def tables(evaluation: Evaluation) -> None:
    """Classes by candidate, and every estimate."""
    st.header("All figures", anchor=False)
    table, plan = evaluation.table, evaluation.plan
    rows = []
    for name in evaluation.candidates:
        row = {"candidate": plan.title(name)}
        for of_class in table.classes:
            e = evaluation.estimate("sensitivity", name, of_class=of_class)
            head = f"{class_rate(table, plan, of_class)}, {n_equals(e.n)}"
            row[head] = with_interval(e.value, e.interval, e.n)
        rows.append(row)
    with st.expander(look.safe(f"By class, {scheme_in_words(plan, table, evaluation.scheme)}")):
        look.table(rows, key="by-class")
    with st.expander("Every estimate by scheme and estimator, counted both ways"):
        every = estimate_rows(evaluation, every=True)
        look.table([dict(zip(ESTIMATE_HEADER, row, strict=True)) for row in every], key="every")


def show(record: Record, evaluation: Evaluation, *, live: bool) -> None:
    """The whole page below the progress."""
    look.page(title(evaluation), facts(record, evaluation))
    look.lead(answer(evaluation))
    rows = limit_rows(evaluation, evaluation.about)
    if rows:
        look.limit_rows(rows)
    elif evaluation.plan.limits:
        look.soft("Verdicts are given once all rounds of the first scheme have finished.")
    else:
        look.soft(
            "No limit set, so there is no verdict. Set one in Settings; best before looking at "
            "results."
        )
    if not live and st.button("Summary (PDF)", type="primary"):
        st.switch_page("summary.py")
    st.header("What to weigh before relying on this", anchor=False)
    found = findings(evaluation.table, evaluation.plan, evaluation)
    look.findings(found, empty="No check raised a doubt.")
    how_sure(evaluation)
    beside(evaluation)
    why_it_varies(evaluation)
    tables(evaluation)
    look.caution(CAUTION)


def figures(record: Record, *, live: bool) -> None:
    """The figures as far as they have come."""
    try:
        evaluation = state.evaluation(record, record.status().done)
        first = "" if evaluation else _first_figures(record)
    except EvalError as error:
        st.error(look.safe(str(error)))
        return
    if evaluation is None:
        look.page("Results")
        st.write(first if live else "No round has finished yet.")
        return
    show(record, evaluation, live=live)


def _first_figures(record: Record) -> str:
    scheme = next(iter(record.rounds.values()))
    first = min(chunk_rounds(record.table.n_cases), scheme.n_rounds)
    return f"First figures after {count(first)} rounds."


def main() -> None:
    """The page."""
    try:
        record = state.record()
        status = record.status() if record else None
    except EvalError as error:
        look.page("Results")
        st.error(look.safe(str(error)))
        return
    if record is None or status is None:
        nothing_yet()
        return
    if status.state in state.LIVE:
        st.fragment(progress, run_every=PROGRESS_EVERY)(record)
        st.fragment(figures, run_every=FIGURES_EVERY)(record, live=True)
        return
    if status.state != "finished":
        ended_early(record, status)
    figures(record, live=False)


main()
