"""What can be wrong with a problem or with the numbers put into it."""


class QpError(ValueError):
    """Base of all errors of this package."""


class NotQpError(QpError):
    """The problem is no quadratic programme with linear constraints and continuous variables."""


class NotDppError(QpError):
    """The parameters do not enter affinely, as cvxpy's parametrised rule set (DPP) asks."""


class ParameterError(QpError):
    """A parameter is missing, of the wrong shape, not finite or of the wrong sign."""
