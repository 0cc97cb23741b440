"""The candidates offered: what each is, its settings and bounds, and how it is made."""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np

from evalcore.errors import PlanError
from evalcore.measures import Floats
from evalcore.nearest import NearestNeighbours
from evalcore.preparation import preparation
from evalcore.settings import Setting, Settings
from evalcore.table import Table
from evalcore.wording import listed, quoted


@dataclass(frozen=True)
class Candidate:
    """One kind of classifier.

    Attributes
    ----------
    key, title : str
    settings : tuple of Setting
    model : callable
        Settings and a random state to an unfitted scikit-learn classifier.
    scaled : callable
        Settings to whether numbers are standardised first.
    named : callable
        Settings to how sentences call it.
    baseline : bool
        True for rules that look at no feature.
    offered_on : bool
        Whether it is in the line-up unless the user says otherwise.
    cost : tuple of float
        Seconds a fit, and seconds a fit and case, on an ordinary core: a rough guide for the
        time left before anything was measured.
    neighbours : bool
        Whether its `k` must not exceed the cases of a bag.
    probabilities : bool
        Whether scores are probabilities, not decision values.
    fixed : callable or None
        For answers that stand in the table already: table and settings to scores (n, K).
    """

    key: str
    title: str
    settings: tuple[Setting, ...]
    model: Callable[[Settings, int], Any]
    scaled: Callable[[Settings], bool]
    named: Callable[[Settings], str]
    baseline: bool = False
    offered_on: bool = False
    cost: tuple[float, float] = (0.008, 2e-6)
    neighbours: bool = False
    probabilities: bool = True
    fixed: Callable[[Table, Settings], Floats] | None = None


def estimator(candidate: Candidate, settings: Settings, table: Table, random_state: int) -> Any:
    """An unfitted pipeline: preparation, then the model.

    Parameters
    ----------
    candidate : Candidate
    settings : mapping
        A value for each of the candidate's settings.
    table : Table
    random_state : int
        Used by candidates that draw random numbers.
    """
    from sklearn.pipeline import make_pipeline

    return make_pipeline(
        preparation(table, scaled=candidate.scaled(settings)),
        candidate.model(settings, random_state),
    )


def _majority(_: Settings, __: int) -> Any:
    from sklearn.dummy import DummyClassifier

    return DummyClassifier(strategy="prior")


def _logistic(settings: Settings, _: int) -> Any:
    """The converged fit: the default solver and tolerance stop visibly short of it."""
    from sklearn.linear_model import LogisticRegression

    return LogisticRegression(
        C=float(settings["C"]), solver="newton-cholesky", tol=1e-12, max_iter=1000
    )


def _lda(_: Settings, __: int) -> Any:
    """Constant columns are dropped first: their rounding noise would be taken for a direction."""
    from sklearn.discriminant_analysis import LinearDiscriminantAnalysis
    from sklearn.feature_selection import VarianceThreshold
    from sklearn.pipeline import make_pipeline

    return make_pipeline(VarianceThreshold(), LinearDiscriminantAnalysis())


def _qda(settings: Settings, _: int) -> Any:
    """A little shrinkage, so that a class with few cases or collinear columns has a covariance."""
    from sklearn.discriminant_analysis import QuadraticDiscriminantAnalysis

    return QuadraticDiscriminantAnalysis(
        solver="eigen", shrinkage=float(settings["shrinkage"]), tol=0.0
    )


def _naive_bayes(_: Settings, __: int) -> Any:
    from sklearn.naive_bayes import GaussianNB

    return GaussianNB()


def _nearest_neighbours(settings: Settings, _: int) -> Any:
    return NearestNeighbours(int(settings["k"]))


def _one_feature(_: Settings, random_state: int) -> Any:
    from sklearn.tree import DecisionTreeClassifier

    return DecisionTreeClassifier(max_depth=1, random_state=random_state)


def _no_model(_: Settings, __: int) -> Any:
    raise PlanError("Answers that stand in the table are not fitted.")


def standing_answers(table: Table, settings: Settings) -> Floats:
    """Somebody's own answers, from a column: 1 for the class named, shape (n, K).

    Raises
    ------
    PlanError
        No such column, or an entry that is none of the classes.
    """
    column = str(settings["column"])
    if not column:
        raise PlanError("`column` must name the column that holds somebody's answers; it is empty.")
    entries = table.entries_of(column)
    place = {name: at for at, name in enumerate(table.classes)}
    odd = sorted(set(entries) - set(place))
    if odd:
        raise PlanError(
            f"The column {quoted(column)} holds {quoted(odd[0])}, which is none of the classes "
            f"{listed([quoted(name) for name in table.classes])}; it must name a class in every "
            "row."
        )
    answers: Floats = np.zeros((table.n_cases, table.n_classes))
    answers[np.arange(table.n_cases), [place[entry] for entry in entries]] = 1.0
    return answers


def _tree(_: Settings, random_state: int) -> Any:
    from sklearn.tree import DecisionTreeClassifier

    return DecisionTreeClassifier(random_state=random_state)


def _forest(settings: Settings, random_state: int) -> Any:
    from sklearn.ensemble import RandomForestClassifier

    return RandomForestClassifier(int(settings["trees"]), random_state=random_state, n_jobs=1)


def _svm(settings: Settings, _: int) -> Any:
    from sklearn.svm import SVC

    return SVC(C=float(settings["C"]))


def _boosting(_: Settings, random_state: int) -> Any:
    from sklearn.ensemble import HistGradientBoostingClassifier

    return HistGradientBoostingClassifier(early_stopping=False, random_state=random_state)


def _yes(_: Settings) -> bool:
    return True


def _no(_: Settings) -> bool:
    return False


def _called(name: str) -> Callable[[Settings], str]:
    return lambda settings: name


_C = Setting("C", "Strength of fit to the data (C)", "number", 1.0, 1e-4, 1e4, smoother="low")

CANDIDATES: dict[str, Candidate] = {
    candidate.key: candidate
    for candidate in (
        Candidate(
            "majority",
            "majority class",
            (),
            _majority,
            _no,
            _called("majority class"),
            baseline=True,
            offered_on=True,
            cost=(0.005, 1e-6),
        ),
        Candidate(
            "logistic",
            "logistic regression",
            (_C,),
            _logistic,
            _yes,
            _called("logistic regression"),
            offered_on=True,
        ),
        Candidate(
            "lda", "linear discriminant (LDA)", (), _lda, _no, _called("linear discriminant")
        ),
        Candidate(
            "qda",
            "quadratic discriminant (QDA)",
            (
                Setting(
                    "shrinkage",
                    "Shrinkage towards a sphere",
                    "number",
                    0.01,
                    1e-6,
                    1.0,
                    smoother="high",
                ),
            ),
            _qda,
            _yes,
            _called("quadratic discriminant"),
        ),
        Candidate("naive_bayes", "naive Bayes", (), _naive_bayes, _no, _called("naive Bayes")),
        Candidate(
            "nearest_neighbours",
            "nearest neighbours",
            (
                Setting("k", "Neighbours (k)", "whole", 5, 1, 200, smoother="high"),
                Setting("scaling", "Scaling", "choice", "standard", choices=("standard", "none")),
            ),
            _nearest_neighbours,
            lambda settings: settings["scaling"] == "standard",
            lambda settings: (
                "nearest neighbour" if settings["k"] == 1 else f"{settings['k']} nearest neighbours"
            ),
            offered_on=True,
            cost=(0.009, 2e-5),
            neighbours=True,
        ),
        Candidate(
            "one_feature",
            "best single split (one feature)",
            (),
            _one_feature,
            _no,
            _called("one-feature rule"),
        ),
        Candidate(
            "present_practice",
            "present practice (answers in a column)",
            (Setting("column", "Column with the answers", "column", ""),),
            _no_model,
            _no,
            _called("present practice"),
            cost=(0.0, 0.0),
            fixed=standing_answers,
        ),
        Candidate("tree", "decision tree", (), _tree, _no, _called("decision tree")),
        Candidate(
            "forest",
            "random forest",
            (Setting("trees", "Trees", "whole", 200, 1, 2000),),
            _forest,
            _no,
            _called("random forest"),
            offered_on=True,
            cost=(0.25, 2e-4),
        ),
        Candidate(
            "svm",
            "support vectors (SVM)",
            (_C,),
            _svm,
            _yes,
            _called("support vectors"),
            cost=(0.01, 2e-5),
            probabilities=False,
        ),
        Candidate(
            "boosting",
            "boosted trees",
            (),
            _boosting,
            _no,
            _called("boosted trees"),
            cost=(0.35, 1e-4),
        ),
    )
}
