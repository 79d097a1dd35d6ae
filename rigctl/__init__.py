"""polrig: rehearse, run, survive and fit unattended angle sweeps of polarizing optics."""

__version__ = "0.1.0"

__all__ = ["__version__"]
