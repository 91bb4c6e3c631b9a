"""A single file that must not exist yet, written whole or not at all."""

from pathlib import Path

from harmonic_planner.export.folder import OutputRefusedError, OutputWriteError


def check(path: Path) -> None:
    """Say early whether a file may be written.

    Parameters
    ----------
    path : Path
        The file to be written.

    Raises
    ------
    OutputRefusedError
        Where something of that name exists, a link to nothing included.
    OutputWriteError
        Where its folder does not exist.
    """
    if path.is_symlink() or path.exists():
        raise _refused(path)
    if not path.parent.is_dir():
        raise OutputWriteError(f"{path}: cannot be written: there is no folder {path.parent}")


def write(path: Path, text: str) -> None:
    """Write a text as a new file in UTF-8, its line ends as they are.

    Parameters
    ----------
    path : Path
        The file. Its folder exists.
    text : str
        The content.

    Raises
    ------
    OutputRefusedError
        Where something of that name exists; it is left alone.
    OutputWriteError
        Where it cannot be written. Nothing is left half-written then.
    """
    try:
        with path.open("x", encoding="utf-8", newline="") as stream:
            try:
                stream.write(text)
                stream.flush()
            except BaseException:
                path.unlink()
                raise
    except FileExistsError:
        raise _refused(path) from None
    except OSError as fault:
        raise OutputWriteError(f"{path}: cannot be written: {fault.strerror or fault}") from fault


def _refused(path: Path) -> OutputRefusedError:
    return OutputRefusedError(f"{path}: exists already; name a file that does not")
