"""What the coverage study repeats: kinds of tables, line-ups, rules for a cut-off."""

from dataclasses import dataclass


@dataclass(frozen=True)
class Cell:
    """What is repeated."""

    scenario: str
    n: int  # units
    candidates: tuple[str, ...]  # as written in a plan; the first is compared with the others
    most: int = 10**9  # tables of it, whatever is asked for; slow candidates have fewer
    bootstrap: bool = True  # whether the second look is carried out too
    # a rule for the smallest class of each table, as on the command line; of one candidate
    cut_off: str = ""


STEADY = ("logistic", "lda", "naive_bayes")
EIGHT = (
    *STEADY,
    *("qda", "tree", *(f"nearest_neighbours:k={k}" for k in (5, 1, 15))),
)
QUICK = (
    Cell("gauss", 60, ("lda",), bootstrap=False),
    Cell("p50", 60, ("naive_bayes",), bootstrap=False),
    Cell("imb", 60, ("lda",), bootstrap=False),
    Cell("noise", 40, ("nearest_neighbours:k=1",), bootstrap=False),
    Cell("xor", 100, ("tree",), bootstrap=False),
)
SMALL = (
    *((scenario, n) for scenario in ("gauss", "imb") for n in (30, 60, 120)),
    *(("p50", 60), ("noise", 40), ("three", 60), ("xor", 100), ("sep", 40)),
)
LARGE = (("gauss", 300), ("gauss", 500), ("imb", 300), ("noise", 120))
DEFAULT = (
    *(Cell(*at, EIGHT) for at in SMALL),
    *(Cell(*at, (*STEADY, "tree")) for at in LARGE),
    *(Cell("units", n, ("logistic", "lda", "nearest_neighbours:k=5")) for n in (10, 20, 40)),
)
TUNED = tuple(
    Cell(*at, (grid,), 400, bootstrap=False)
    for at in (("gauss", 60), ("imb", 60), ("noise", 40), ("xor", 100))
    for grid in ("nearest_neighbours:k=1/5/15", "logistic:C=0.01/1/100")
)
SLOW_ON = (("gauss", 60), ("imb", 60), ("xor", 100))
SLOW = (
    *TUNED,
    *(Cell(*at, ("svm",), 400) for at in SLOW_ON),
    *(Cell(*at, ("forest",), 400, bootstrap=False) for at in SLOW_ON),
)
FLOOR, COST = "floor=0.9", "miss=5,alarm=1"
SMALL_AND_LARGER = tuple((scenario, n) for scenario in ("gauss", "imb") for n in (60, 120))
CUT_OFF = tuple(
    Cell(*at, (candidate,), bootstrap=False, cut_off=rule)
    for rule, tables in (
        (FLOOR, (*SMALL_AND_LARGER, ("noise", 40), ("xor", 100), ("units", 20), ("units", 40))),
        (COST, SMALL_AND_LARGER),
    )
    for at in tables
    for candidate in ("logistic", "naive_bayes", "nearest_neighbours:k=5")
)
CELLS = {"quick": QUICK, "default": DEFAULT, "slow": SLOW, "cut_off": CUT_OFF}
