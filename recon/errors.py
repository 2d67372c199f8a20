"""The error that bad input raises."""


class InputError(ValueError):
    """An argument, a file or a field that cannot be used as it is.

    The message is one sentence: the argument, the place of its first offending entry, the value found
    there, and what to give instead.
    """
