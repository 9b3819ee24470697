"""The version of the package: here and nowhere else."""

__all__ = ["__version__"]

__version__ = "0.1.0"
