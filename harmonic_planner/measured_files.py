"""Filters known from files: two-ports in Touchstone, tables of rejection over frequency.

References
----------
.. [1] IBIS Open Forum, "Touchstone File Format Specification", versions 1.1 and 2.0.
.. [2] K. Kurokawa, "Power Waves and the Scattering Matrix", IEEE Trans. MTT 13, 1965 (between unequal impedances).
"""

from __future__ import annotations

import io
import re
import warnings
from pathlib import Path
from typing import Any

import numpy as np

from harmonic_planner.column_files import FREQUENCY_COLUMNS, ColumnFileError, number_in, read_bytes, read_columns
from harmonic_planner.model import MeasuredFilter
from harmonic_planner.quantities import RATIO_DB
from harmonic_planner.scenario_tables import RejectionTable, TouchstoneTable

DEEPEST_DB = 300.0
"""Attenuation that a transmission of zero is taken for."""
_NOISE_COLUMNS = 5
_EXTENSION = re.compile(r"\.s(\d{1,4})p", re.IGNORECASE)
_REJECTION_COLUMNS = {
    "rejection": RATIO_DB.between(-20, DEEPEST_DB, example="45 dB").parse,
    "rejection_db": number_in(-20.0, DEEPEST_DB),
}


def read_filter(table: TouchstoneTable | RejectionTable, *, folder: Path, impedance_ohm: float) -> MeasuredFilter:
    """Read the file that a scenario names.

    Parameters
    ----------
    table : TouchstoneTable or RejectionTable
    folder : pathlib.Path
        The scenario's own, where a relative path starts.
    impedance_ohm : float
        Of the stage [ohm]: a two-port measured between others is recalculated to it.

    Returns
    -------
    MeasuredFilter

    Raises
    ------
    ColumnFileError
        With what is wrong, on one line.
    """
    if isinstance(table, RejectionTable):
        return _read_table(table, folder / table.table)
    return _read_touchstone(table, folder / table.touchstone, impedance_ohm)


def _read_table(table: RejectionTable, path: Path) -> MeasuredFilter:
    """Read rejection over frequency."""
    (_, frequency_hz), (_, rejection_db) = read_columns(path, (FREQUENCY_COLUMNS, _REJECTION_COLUMNS))
    _check_ascending(np.array(frequency_hz))
    return MeasuredFilter(
        "table", table.table, tuple(frequency_hz), tuple(rejection_db), beyond_sweep=table.beyond_sweep
    )


def _read_touchstone(table: TouchstoneTable, path: Path, impedance_ohm: float) -> MeasuredFilter:
    """Read a two-port and recalculate it to the stage's impedance."""
    extension = _EXTENSION.fullmatch(path.suffix)
    if extension is None and path.suffix.lower() != ".ts":
        raise ColumnFileError("its name must end in .s2p, or in .ts for version 2")
    if extension is not None and int(extension[1]) != 2:
        raise ColumnFileError(f"it has {int(extension[1])} port{'s' * (extension[1] != '1')}; a filter has two")
    frequency_hz, s, z0, waves = _two_port(path)
    s = _renormalised(s, z0, impedance_ohm, waves)
    with np.errstate(divide="ignore"):
        attenuation_db = -20 * np.log10(np.abs(s[:, 1, 0]))
        return_loss_db = -20 * np.log10(np.abs(s[:, 0, 0]))
    return MeasuredFilter(
        "touchstone",
        table.touchstone,
        tuple(frequency_hz.tolist()),
        tuple(np.minimum(attenuation_db, DEEPEST_DB).tolist()),
        return_loss_db=tuple(np.minimum(return_loss_db, DEEPEST_DB).tolist()),
        impedance_ohm=(float(z0[0, 0].real), float(z0[0, 1].real)),
        beyond_sweep=table.beyond_sweep,
    )


def _two_port(path: Path) -> tuple[Any, Any, Any, str]:
    """Return frequencies [Hz], S (frequency, 2, 2), port impedances (frequency, 2) [ohm], and S's kind of waves.

    Notes
    -----
    The parser is handed text and never the file: scikit-rf's `Network` would unpickle one that it cannot parse, and so
    run what it holds. In version 1 a frequency below the one before starts noise data, of five columns.
    """
    data = read_bytes(path)
    if not data.strip():
        raise ColumnFileError("it is empty")
    from skrf.io.touchstone import Touchstone  # heavy, and only this function needs it

    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError:
        text = data.decode("latin-1")
    file = io.StringIO(text)
    file.name = str(path)
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            parsed = Touchstone(file)
            frequency_hz, s = parsed.get_sparameter_arrays()
            z0 = np.broadcast_to(np.asarray(parsed.z0, dtype=complex), (len(frequency_hz), s.shape[1]))
    except Exception as error:  # the parser promises no kind of error for a file that is none
        reason = " ".join("".join(c if c.isprintable() else " " for c in str(error)).split())[:80]
        raise ColumnFileError(f"it is not a Touchstone file of two ports ({reason})") from None
    if len(frequency_hz) == 0:
        raise ColumnFileError("it has no row of numbers")
    if s.shape[1:] != (2, 2):
        raise ColumnFileError(f"it has {s.shape[1]} port{'s' * (s.shape[1] != 1)}; a filter has two")
    noise = parsed.noise
    if noise is not None and np.asarray(noise, dtype=object).size and np.shape(noise)[-1] != _NOISE_COLUMNS:
        raise ColumnFileError(f"its frequencies must ascend; one follows {frequency_hz[-1]:.12g} Hz and is below it")
    _check_ascending(frequency_hz)
    if not (np.isfinite(s).all() and np.isfinite(z0).all()):
        raise ColumnFileError("it holds numbers that are not finite")
    if not (z0.real > 0).all():
        raise ColumnFileError("the impedance of its ports must be above 0 ohm")
    return frequency_hz, s, z0, parsed.s_def or "power"


def _renormalised(s: Any, z0: Any, impedance_ohm: float, waves: str) -> Any:
    """Return S between two impedances alike, both `impedance_ohm`."""
    if np.allclose(z0, impedance_ohm, rtol=1e-12, atol=0):
        return s
    from skrf.network import renormalize_s

    return renormalize_s(s, z0, np.full_like(z0, impedance_ohm), s_def=waves)


def _check_ascending(frequency_hz: Any) -> None:
    if len(frequency_hz) < 2:
        raise ColumnFileError("it must hold at least two frequencies, ascending")
    falling = np.flatnonzero(np.diff(frequency_hz) <= 0)
    if falling.size:
        at, before = frequency_hz[falling[0] + 1], frequency_hz[falling[0]]
        raise ColumnFileError(f"its frequencies must ascend; {at:.12g} Hz follows {before:.12g} Hz")
