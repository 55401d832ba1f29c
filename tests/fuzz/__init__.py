"""Hostile input: faults put into honest sheets, and what the command must make of them."""
