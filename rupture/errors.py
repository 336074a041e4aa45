"""Errors for people: each message says what was wrong, where, and what to do."""


class RuptureError(Exception):
    """Base of all errors that the program raises on purpose; `exit_code` is the command's exit status."""

    exit_code = 2


class InputError(RuptureError):
    """Wrong use or unreadable input: a file, channel or key that cannot be taken (exit 2)."""

    exit_code = 2


class DataError(RuptureError):
    """The input is readable, but the data cannot answer the question (exit 1)."""

    exit_code = 1


class RecordWarning(UserWarning):
    """Something about the records of one site that was mended or left out; the message names the site."""
