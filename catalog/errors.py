"""The tree of named errors. Every message says the rule, the field, the value given and what to do next."""


class HoldtightError(Exception):
    """Root of all errors that are shown to a user as a line or two."""

    exit_code = 1


class InputError(HoldtightError):
    """Something the user gave is wrong (exit code 2)."""

    exit_code = 2


class WorkError(HoldtightError):
    """The input was fine, the work failed (exit code 1)."""

    exit_code = 1
