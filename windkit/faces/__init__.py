"""Figures, tables, the report and the command: they show and compute nothing new."""
