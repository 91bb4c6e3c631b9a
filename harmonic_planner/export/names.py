"""File names made from what the user called things."""

import re
import unicodedata


def slug(name: str) -> str:
    """Reduce a name to what every file system and simulator takes.

    Parameters
    ----------
    name : str
        Any text.

    Returns
    -------
    str
        Only ``a`` to ``z``, ``0`` to ``9`` and ``_``, at most 40 characters; ``stage`` where nothing is left.

    Examples
    --------
    >>> slug("First doubler (x2)")
    'first_doubler_x2'
    """
    plain = unicodedata.normalize("NFKD", name).encode("ascii", "ignore").decode().lower()
    return re.sub(r"[^a-z0-9]+", "_", plain)[:40].strip("_") or "stage"


def stage_stem(number: int, name: str) -> str:
    """Name the files of one stage.

    Parameters
    ----------
    number : int
        Position of the stage in the chain, from 1: it keeps the names unique and in order.
    name : str
        The stage's name.

    Returns
    -------
    str
        For instance ``01_first_doubler``.
    """
    return f"{number:02d}_{slug(name)}"
