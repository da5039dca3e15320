"""The family of errors a user may meet; each message says what to do next."""


class McgeoError(Exception):
    """Base of all errors meant for the user; ``exit_code`` is what the command line returns."""

    exit_code = 2


class ConfigError(McgeoError):
    """One or more faults of a configuration, each a line ``file:line:column: key: what is wrong, what is allowed``.

    Parameters
    ----------
    faults : list of str
        One complete line per fault, in the order of the file.
    """

    def __init__(self, faults: list[str]) -> None:
        super().__init__("\n".join(faults))
        self.faults = faults


class GeometryError(McgeoError):
    """A cell, metric or geometry outside the range that works; the message names the range.

    Attributes
    ----------
    key : str
        Path of the key of the configuration that it came from, empty where none is known.
    """

    key = ""


class StorageError(McgeoError):
    """A result file that cannot be read, written, or that belongs to another configuration."""


class NumericalError(McgeoError):
    """Numbers that are none where there should be some: nothing the user did; exit code 1."""

    exit_code = 1


class RunInterrupted(McgeoError):
    """A run stopped by a signal; exit code 128 + the signal's number."""

    def __init__(self, message: str, signal_number: int) -> None:
        super().__init__(message)
        self.exit_code = 128 + signal_number
