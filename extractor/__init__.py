"""Extractor: from a coded sheet of reported ANOVAs to comparable effect sizes with sampling variances."""

__version__ = "0.1.0"
__all__ = ["Result", "audit_sheet", "convert"]


def __getattr__(name: str) -> object:
    """Load the Python interface on first use, so that importing the package costs nothing."""
    if name in __all__:
        from extractor import api

        return getattr(api, name)
    raise AttributeError(f"module 'extractor' has no attribute {name!r}")
