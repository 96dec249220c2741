"""Tests of windkit; a package only so that they can share `tests.small_study`."""
