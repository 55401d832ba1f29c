"""Participants behind more than one row: recognised, and the covariances they bring."""
