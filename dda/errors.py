"""The two ways a run can fail, and what the command line makes of them."""


class InputError(ValueError):
    """The user asked for something that cannot be done; the message says what would be right.

    The command line prints the message alone and exits with code 2.
    """


class ComputationError(RuntimeError):
    """A computation that was asked for correctly did not succeed; exit code 1."""
