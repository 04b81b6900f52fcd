"""Multipliers of intervals and one tail probability."""

from __future__ import annotations

from leachkin.problems import argument_error


def check_level(level: float) -> float:
    """Return a confidence level, refused unless it lies between 0 and 1.

    Raises
    ------
    InputProblems
        For a level such as 95 instead of 0.95.
    """
    if not 0.0 < level < 1.0:
        raise argument_error("level", f"{level:g}", "between 0 and 1", "level=0.95 for 95 %")
    return float(level)


def normal_multiplier(level: float, sides: int = 2) -> float:
    """Return the standard normal quantile of a two-sided or one-sided level.

    Examples
    --------
    >>> round(normal_multiplier(0.95), 4)
    1.96
    """
    from scipy.special import ndtri

    return float(ndtri(1.0 - (1.0 - check_level(level)) / sides))


def student_multiplier(level: float, degrees_of_freedom: int, sides: int = 2) -> float:
    """Return Student's t of a level with the true degrees of freedom.

    Examples
    --------
    >>> round(student_multiplier(0.95, 1), 1)
    12.7
    """
    from scipy.special import stdtrit

    if degrees_of_freedom < 1:
        raise argument_error("degrees_of_freedom", str(degrees_of_freedom), "1 or more")
    return float(stdtrit(degrees_of_freedom, 1.0 - (1.0 - check_level(level)) / sides))


def chi_square_upper_tail(value: float, degrees_of_freedom: int) -> float:
    """Return the chance of a chi-square value at least this large."""
    from scipy.special import chdtrc

    return float(chdtrc(degrees_of_freedom, value))
