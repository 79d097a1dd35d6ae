"""How answers are written."""

NOT_A_NUMBER = "9.910000E+37"
"""SCPI-1999 volume 1, 7.2.1.5; from memory."""


def nr3(value: float, *, digits: int = 6) -> str:
    """Write a number as NR3 response data with so many decimals: IEEE 488.2, 8.7.4."""
    return f"{value:.{digits}E}"
