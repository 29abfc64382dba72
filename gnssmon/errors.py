"""Every exception of our own, as a tree.

    GnssmonError
    ├── SourceError          the world failed: a port, socket or file could not be opened, or was lost for good (exit 4)
    ├── ConfigurationError   a TOML file, a preset name, a coordinate or another setting cannot be used (exit 2)
    ├── RecordingError       the evidence could not be written, or a recording folder cannot be read (exit 4)
    └── OutputError          a result could not be written to where the user asked for it (exit 4)

Bad bytes in a stream are never an exception: they are counted and kept as a fact.
Each message says what happened, where, and what to do next, in one line.
"""


class GnssmonError(Exception):
    """Base of all errors that the command line turns into one line on stderr and an exit code."""

    exit_code = 4


class SourceError(GnssmonError):
    """A source could not be opened or ended in a way that cannot be mended by waiting."""


class ConfigurationError(GnssmonError):
    """What the user asked for cannot be understood; names the file, line and key where there are any."""

    exit_code = 2


class RecordingError(GnssmonError):
    """Evidence could not be written or read back."""


class OutputError(GnssmonError):
    """A report or result could not be written."""
