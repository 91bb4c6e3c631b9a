"""A folder of results, written whole or not at all.

The files are written into a temporary folder beside the target, which then takes the target's place by renaming. What
stood there before is put back should anything fail, and is removed only when the new folder stands.
"""

import contextlib
import json
import os
import shutil
import stat
from collections.abc import Mapping
from pathlib import Path, PurePosixPath
from uuid import uuid4

from harmonic_planner.model import PlannerError

SCHEMA_START = "harmonic-planner"
"""How the `schema` of every plan.json begins, whatever its version."""

_BYSTANDERS = frozenset({".DS_Store", "Thumbs.db", "desktop.ini"})
"""Files that desktop programs leave in any folder that a person opens."""


class OutputRefusedError(PlannerError):
    """The folder named for the results holds something that is not ours to replace."""


class OutputWriteError(PlannerError):
    """The results cannot be written, though the place named for them is acceptable."""


def check(out: Path) -> None:
    """Say early whether results may be written to `out`.

    Parameters
    ----------
    out : Path
        The folder to be written; it need not exist.

    Raises
    ------
    OutputRefusedError
        Where it is a file, the current folder or one above it, a link to nothing, or a folder with files that this
        program did not write there.
    OutputWriteError
        Where permission is missing.
    """
    try:
        _inspect(out)
    except OSError as fault:
        raise OutputWriteError(_because(out, fault)) from fault


def write(out: Path, files: Mapping[str, bytes | str]) -> None:
    """Write a folder of files whole, in place of an earlier one of ours, or leave everything as it was.

    Parameters
    ----------
    out : Path
        The folder. Missing folders above it are made; a link to a folder is followed.
    files : mapping of str to bytes or str
        Name relative to the folder, with ``/`` between the parts, and content; text is written as UTF-8.

    Raises
    ------
    OutputRefusedError, OutputWriteError
        As `check` does, and where writing fails. Nothing is left half-written then.
    ValueError
        For a name that leads outside the folder.
    """
    for name in files:
        parts = PurePosixPath(name).parts
        if not parts or name.startswith("/") or ".." in parts:
            raise ValueError(f"{name!r} is not a name inside the output folder")
    check(out)
    target = out.resolve()
    made: list[Path] = []
    try:
        for folder in reversed([folder for folder in target.parents if not folder.exists()]):
            folder.mkdir()
            made.append(folder)
        _build_and_swap(target, files)
    except BaseException as fault:
        with contextlib.suppress(OSError):
            for folder in reversed(made):
                folder.rmdir()
        if isinstance(fault, OSError):
            raise OutputWriteError(_because(out, fault)) from fault
        raise


def _inspect(out: Path) -> None:
    """Raise unless `out` is missing, empty or one of ours, and its place can be written to."""
    if out.is_symlink() and not out.exists():
        raise OutputRefusedError(f"--out {out}: a link to nothing; name a folder")
    target = out.resolve()
    here = Path.cwd().resolve()
    if target == here or target in here.parents:
        raise OutputRefusedError(f"--out {out}: is the current folder or lies above it; name a folder of its own")
    if target.exists():
        if not target.is_dir():
            raise OutputRefusedError(f"--out {out}: is a file; name a folder that is new, empty or from an earlier run")
        _refuse_foreign(out, target)
        if not os.access(target, os.W_OK | os.X_OK):
            raise PermissionError(13, "no permission to replace it")
    parent = next(folder for folder in target.parents if folder.exists())
    if not parent.is_dir():
        raise OutputRefusedError(f"--out {out}: {parent} is a file, not a folder")
    if not os.access(parent, os.W_OK | os.X_OK):
        raise PermissionError(13, f"no permission to write in {parent}")


def _refuse_foreign(out: Path, target: Path) -> None:
    """Raise where the folder holds a file that no earlier run wrote."""
    example = next(target.iterdir(), None)
    if example is None:
        return
    written = _written_by_us(target)
    if written is None:
        raise OutputRefusedError(
            f"--out {out}: holds something that is not a plan ({example.name}, for one); "
            "name a folder that is new, empty or from an earlier run"
        )
    if not written:
        return
    present = sorted(path for path in target.rglob("*") if path.is_symlink() or not path.is_dir())
    names = [path.relative_to(target).as_posix() for path in present if path.name not in _BYSTANDERS]
    foreign = next((name for name in names if name not in written), None)
    if foreign is not None:
        raise OutputRefusedError(
            f"--out {out}: holds {foreign}, which no plan wrote and replacing the folder would delete; "
            "move it away or name another folder"
        )


def _written_by_us(target: Path) -> frozenset[str] | None:
    """Return the names that the folder's plan.json lists (none from a plan that lists none), None without a plan."""
    record = target / "plan.json"
    if record.is_symlink() or not record.is_file():
        return None
    try:
        content = json.loads(record.read_text(encoding="utf-8"))
    except (ValueError, RecursionError):
        return None
    if not isinstance(content, dict) or not str(content.get("schema", "")).startswith(SCHEMA_START):
        return None
    listed = content.get("files", [])
    names = frozenset(name for name in listed if isinstance(name, str)) if isinstance(listed, list) else frozenset()
    return names | {"plan.json"} if names else frozenset()


def _build_and_swap(target: Path, files: Mapping[str, bytes | str]) -> None:
    """Write into a sibling of `target`, then rename it into place; put the old one back on any failure."""
    mark = uuid4().hex[:12]
    fresh = target.parent / f".plan-new-{mark}"
    old = target.parent / f".plan-old-{mark}"
    try:
        fresh.mkdir()
        for name, content in files.items():
            path = fresh / name
            path.parent.mkdir(parents=True, exist_ok=True)
            path.write_bytes(content.encode("utf-8") if isinstance(content, str) else content)
        if target.exists():
            fresh.chmod(stat.S_IMODE(target.stat().st_mode))
            target.rename(old)
        fresh.rename(target)
    except BaseException:
        if old.exists() and not target.exists():
            old.rename(target)
        raise
    finally:
        shutil.rmtree(fresh, ignore_errors=True)
        if target.exists():
            shutil.rmtree(old, ignore_errors=True)


def _because(out: Path, fault: OSError) -> str:
    """Say why `out` cannot be written."""
    return f"--out {out}: cannot be written: {fault.strerror or fault}"
