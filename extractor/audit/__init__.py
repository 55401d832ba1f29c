"""Checks of the printed numbers: support, granularity, contradiction, diagnosis."""
