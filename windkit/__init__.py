"""Kernels, study steps and faces behind the site-study workbooks.

Three floors, imports pointing down only: `windkit.kernels` (pure functions on arrays),
`windkit.study` (time series, files, decisions) and `windkit.faces` (figures, report, command).
Importing this package loads none of them.
"""

__version__ = "0.1.0"

__all__ = ["__version__", "correct_long_term"]


def __getattr__(name: str) -> object:
    """Load the one call of the long-term step when it is first asked for, and pandas with it."""
    if name == "correct_long_term":
        from windkit.study.long_term_blend import correct_long_term

        return correct_long_term
    raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
