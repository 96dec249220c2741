"""Kernels, study steps and faces behind the site-study workbooks.

Three floors, imports pointing down only: `windkit.kernels` (pure functions on arrays),
`windkit.study` (time series, files, decisions) and `windkit.faces` (figures, report, command).
Importing this package loads none of them.
"""

__version__ = "0.1.0"
