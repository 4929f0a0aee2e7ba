"""watchpot: derives and checks formulas for repeatedly measured quantum systems (hbar = 1)."""

__version__ = "0.1.0"

__all__ = ["Derived", "Problem", "__version__"]


def __getattr__(name: str) -> object:
    """Load the Python face on first use, so that `watchpot --help` stays quick."""
    if name in ("Problem", "Derived"):
        from derive import face

        return getattr(face, name)
    raise AttributeError(f"module 'derive' has no attribute {name!r}")
