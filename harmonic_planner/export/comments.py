"""Text that people wrote, made fit to stand in a comment of a file that other programs read."""

import re
import unicodedata

LONGEST = 160
"""Characters of one text in a comment; what is beyond is cut off."""

_WRITTEN_OUT = str.maketrans(
    {"×": "x", "–": "-", "—": "-", "−": "-", "⁄": "/", "μ": "u", "Ω": "ohm", "°": " deg", "±": "+/-"}
)
"""Signs of the trade, in their compatibility form."""
_OTHERS = re.compile(r"[^A-Za-z0-9 .,:()/%+=_&@-]")


def comment_text(text: str) -> str:
    """Reduce a text to what no simulator or reader of network files takes for anything but a comment.

    Parameters
    ----------
    text : str
        A title or name from a scenario or kit.

    Returns
    -------
    str
        One line of ASCII: letters, digits, spaces and ``.,:()/%+=_&@-``; marks on letters are left out, a few signs are
        written out, anything else is ``?``. At most `LONGEST` characters.

    Notes
    -----
    A comment still belongs behind words of our own: what stands first in a line (``+``, ``.control``, a ``*#`` that
    starts a command) is what these programs look at, and so is a backslash at its end or a second ``!``.

    Examples
    --------
    >>> comment_text("Doppelgänger ×2, 50 Ω"), comment_text("a;b$c")
    ('Doppelganger x2, 50 ohm', 'a?b?c')
    """
    letters = unicodedata.normalize("NFKD", text).translate(_WRITTEN_OUT)
    plain = "".join(character for character in letters if not unicodedata.combining(character))
    shown = _OTHERS.sub("?", re.sub(r"\s+", " ", plain)).strip()
    return shown if len(shown) <= LONGEST else shown[: LONGEST - 3].rstrip() + "..."
