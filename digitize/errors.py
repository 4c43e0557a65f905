"""Everything that can be wrong with an input, in words for the person who gave it.

    InputError                  one file or page cannot be used; the others go on
    ├── UnreadableFile          not an image, truncated, empty, encrypted, too large
    ├── NoGrid                  the scale of the paper cannot be found
    ├── NoTrace                 no ECG on this page
    ├── PoorResolution          too few pixels per millimetre to measure
    └── OutputExists            a result is there already and --replace was not given
"""


class InputError(Exception):
    """One file or page cannot be used. The text says what happened and what to do."""


class UnreadableFile(InputError):
    """The file cannot be opened as an image or a document."""


class NoGrid(InputError):
    """The scale of the paper cannot be found."""


class NoTrace(InputError):
    """There is no ECG trace on this page."""


class PoorResolution(InputError):
    """There are too few pixels per millimetre to measure."""


class OutputExists(InputError):
    """A result of that name exists and may not be replaced."""
