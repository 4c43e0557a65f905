"""Advice in the words of the page: an option of the command line is a field or a tool there.

Self-checks and errors are written once, for whoever started a command. On the page nobody gives an
option; the same advice leads to the place where a person does it there.
"""

import re

_PART = "under “Page and patient”"
PLACES = {
    "--speed": f"the speed {_PART}",
    "--gain": f"the gain {_PART}",
    "--layout": f"the layout {_PART}",
    "--leads": f"the leads row by row {_PART}",
    "--turn": f"the turn {_PART}",
    "--timing": f"“Columns” {_PART}",
    "--px-per-mm": "its scale by two places",
}
_OPTION = re.compile("|".join(PLACES))
# Checks whose answer is one field of the page, by the name of the check.
FIELDS = {"speed": "speed", "gain": "allgain", "layout": "layout", "timing": "timing"}


def on_page(text: str) -> str:
    """Return a message with every option in it named as the place on the page."""
    return _OPTION.sub(lambda match: PLACES[match[0]], text)
