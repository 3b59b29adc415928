"""Large digits for the one number that a reader looks for first."""

from __future__ import annotations

# Three lines each, drawn with the characters that also frame tables.
_GLYPHS = {
    "0": ("┏━┓", "┃ ┃", "┗━┛"),
    "1": (" ╺┓", "  ┃", " ╺┻"),
    "2": ("╺━┓", "┏━┛", "┗━╸"),
    "3": ("╺━┓", " ━┫", "╺━┛"),
    "4": ("╻ ╻", "┗━┫", "  ╹"),
    "5": ("┏━╸", "┗━┓", "╺━┛"),
    "6": ("┏━╸", "┣━┓", "┗━┛"),
    "7": ("╺━┓", "  ┃", "  ╹"),
    "8": ("┏━┓", "┣━┫", "┗━┛"),
    "9": ("┏━┓", "┗━┫", "╺━┛"),
    ".": (" ", " ", "."),
    "-": ("  ", "━━", "  "),
    " ": (" ", " ", " "),
    "%": ("o /", " / ", "/ o"),
}


def large(text: str) -> tuple[str, str, str]:
    """Draw a number as three lines of text.

    Parameters
    ----------
    text : str
        Digits, point, minus, blank and percent sign.
    """
    first, second, third = (" ".join(_GLYPHS[sign][line] for sign in text) for line in range(3))
    return first, second, third
