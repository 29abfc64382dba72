"""Every exception of our own, as a tree; and the exit codes.

    GnssmonError
    ├── SourceError          the world failed: a port, socket or file could not be opened, or was lost for good (exit 4)
    ├── ConfigurationError   a TOML file, a preset name, a coordinate or another setting cannot be used (exit 2)
    ├── RecordingError       the evidence could not be written, or a recording folder cannot be read (exit 4)
    └── OutputError          a result could not be written to where the user asked for it (exit 4)

Bad bytes in a stream are never an exception: they are counted and kept as a fact.
Each message says what happened, where, and what to do next, in one line.
"""

ACCEPTED, REJECTED, WRONG_USAGE, UNDECIDED, SOURCE_FAILED, INTERRUPTED = 0, 1, 2, 3, 4, 130
"""Exit codes of the contract."""

OWN_FAULT = 70
"""A fault of the program itself (EX_SOFTWARE of BSD's sysexits): Python's own 1 would read as a rejection."""


class GnssmonError(Exception):
    """Base of all errors that the command line turns into one line on stderr and an exit code."""

    exit_code = SOURCE_FAILED


class SourceError(GnssmonError):
    """A source could not be opened or ended in a way that cannot be mended by waiting."""


class ConfigurationError(GnssmonError):
    """What the user asked for cannot be understood; names the file, line and key where there are any."""

    exit_code = WRONG_USAGE


class RecordingError(GnssmonError):
    """Evidence could not be written or read back."""


class OutputError(GnssmonError):
    """A report or result could not be written."""
