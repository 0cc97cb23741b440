"""What can go wrong with what came from outside: one sentence each, fit to be shown as it is."""


class EvalError(ValueError):
    """Something that came cannot be used; the message says what, what is allowed, why and where."""


class TableError(EvalError):
    """A file or a table cannot be read or judged."""


class PlanError(EvalError):
    """A plan does not fit its table, or a setting is out of bounds."""


class RecordError(EvalError):
    """A record on disk is missing, incomplete or altered."""
