"""Errors that stop a run. Each carries the exit status of the command line contract and one clear line."""

from __future__ import annotations


class ExtractorError(Exception):
    """Base of all errors a user can cause; ``exit_code`` is the command's exit status."""

    exit_code = 1


class UsageError(ExtractorError):
    """A command or function was called with words it does not know."""

    exit_code = 2


class UnreadableInput(ExtractorError):
    """A sheet cannot be read; the message names file, sheet, cell and remedy."""

    exit_code = 4


class InvalidCodebook(ExtractorError):
    """A codebook is not valid; the message names file, key and remedy."""

    exit_code = 5
