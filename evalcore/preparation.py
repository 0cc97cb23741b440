"""What happens to features before a model sees them, all of it learned inside the bag.

Numbers: a missing value becomes the bag's median; scaled to mean 0 and standard deviation 1 where
the candidate asks for it. Text: a missing entry becomes the bag's most frequent one; one column a
category, a category the bag lacks giving zeros.
"""

from typing import Any

from evalcore.table import Table


def preparation(table: Table, *, scaled: bool) -> Any:
    """An unfitted transformer for the columns of a table.

    Parameters
    ----------
    table : Table
        Only the kinds of its columns are used.
    scaled : bool
        Whether numbers are standardised.

    Returns
    -------
    sklearn.compose.ColumnTransformer
    """
    from sklearn.compose import ColumnTransformer
    from sklearn.impute import SimpleImputer
    from sklearn.pipeline import make_pipeline
    from sklearn.preprocessing import OneHotEncoder, StandardScaler

    def places(kind: str) -> list[int]:
        return [at for at, column in enumerate(table.columns) if column.kind == kind]

    numbers = [SimpleImputer(strategy="median", keep_empty_features=True)]
    if scaled:
        numbers.append(StandardScaler())
    texts = make_pipeline(
        SimpleImputer(strategy="most_frequent", keep_empty_features=True),
        OneHotEncoder(handle_unknown="ignore", sparse_output=False),
    )
    return ColumnTransformer(
        [
            ("numbers", make_pipeline(*numbers), places("number")),
            ("texts", texts, places("text")),
        ]
    )
