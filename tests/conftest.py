"""Doctests are looked for in every module but these, which share one name."""

collect_ignore_glob = ["*/conftest.py"]
