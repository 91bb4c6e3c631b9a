"""Kit files: read with or without bases; every problem told at once with key, value and what is allowed."""

import re
from importlib.resources import files
from pathlib import Path

import pytest

from harmonic_planner.model import PlannerError
from harmonic_planner.parts.kits import KitError, load_kit

SHIPPED = (files("harmonic_planner.parts") / "data" / "chip-0603.toml").read_text(encoding="utf-8")
BARE = re.sub(r"\{ value = (.*?), basis = .* \}", r"\1", SHIPPED)


def problems(tmp_path: Path, text: str) -> tuple[str, ...]:
    path = tmp_path / "own.toml"
    path.write_text(text, encoding="utf-8")
    with pytest.raises(KitError) as caught:
        load_kit("own.toml", tmp_path)
    assert isinstance(caught.value, PlannerError)
    assert str(caught.value) == "\n".join(caught.value.problems)
    prefix = f"kit file {path}: "
    assert all(problem.startswith(prefix) for problem in caught.value.problems)
    return tuple(problem.removeprefix(prefix) for problem in caught.value.problems)


def test_a_users_file_loads_like_a_shipped_one_with_bases_or_without(tmp_path: Path):
    (tmp_path / "with.toml").write_text(SHIPPED, encoding="utf-8")
    (tmp_path / "without.toml").write_text(BARE, encoding="utf-8")
    shipped = load_kit("chip-0603", tmp_path)
    assert load_kit("with.toml", tmp_path) == shipped
    bare = load_kit(str(tmp_path / "without.toml"), Path("elsewhere"))
    assert bare.basis == {}
    assert (bare.inductor, bare.capacitor, bare.board) == (shipped.inductor, shipped.capacitor, shipped.board)


def test_verdict_and_bandwidth_have_the_usual_values_where_they_are_left_out(tmp_path: Path):
    (tmp_path / "own.toml").write_text(BARE[: BARE.index("[verdict]")], encoding="utf-8")
    kit, shipped = load_kit("own.toml", tmp_path), load_kit("chip-0603", tmp_path)
    assert kit.thresholds == shipped.thresholds
    assert (kit.untuned_factor, kit.tuned_factor) == (shipped.untuned_factor, shipped.tuned_factor)


NEWER_KEYS = re.compile(r"^(temperature|current|voltage|parallel|shared_via) = .*\n", re.MULTILINE)


def test_ratings_drift_parallel_parts_and_shared_vias_may_be_left_out(tmp_path: Path):
    text, removed = NEWER_KEYS.subn("", BARE)
    assert removed == 7
    (tmp_path / "own.toml").write_text(text, encoding="utf-8")
    kit = load_kit("own.toml", tmp_path)
    assert (kit.inductor.temperature_per_k, kit.inductor.current_a, kit.inductor.parallel) == (None, None, False)
    assert (kit.capacitor.temperature_per_k, kit.capacitor.voltage_v, kit.capacitor.parallel) == (None, None, False)
    assert kit.board.shared_via_h == 0
    assert not kit.tuned


def test_a_trimmer_kit_states_a_continuous_range(tmp_path: Path):
    text = BARE.replace('grid = "E24"\ntolerance = "2 %"', 'grid = "continuous"\ntolerance = "2 %"')
    text = text.replace('title = "', 'tuned = true\ntitle = "', 1)
    (tmp_path / "own.toml").write_text(text, encoding="utf-8")
    kit = load_kit("own.toml", tmp_path)
    assert kit.tuned
    assert kit.capacitor.continuous
    with pytest.raises(PlannerError, match="continuous range"):
        kit.capacitor.values_f()


def test_a_grid_may_be_a_list_of_values(tmp_path: Path):
    text = BARE.replace('grid = "E24"', 'grid = ["1.0 nH", "2.2 nH", "15 nH"]', 1)
    (tmp_path / "own.toml").write_text(text, encoding="utf-8")
    assert load_kit("own.toml", tmp_path).inductor.values_h() == pytest.approx((1e-9, 2.2e-9, 15e-9))


INDUCTOR_KEYS = (
    "smallest, largest, grid, tolerance, q, q_frequency, q_exponent, q_most, self_resonance, "
    "self_resonance_inductance, self_resonance_exponent, mounting, temperature, current, parallel"
)


@pytest.mark.parametrize(
    "old, new, expected",
    [
        ('smallest = "1.0 nH"', 'smallest = "1.0 nh"',
         "inductor.smallest = '1.0 nh': expected a text with the unit H, such as '10 nH'"),
        ('smallest = "1.0 nH"', "smallest = 1.0e-9",
         "inductor.smallest = 1e-09: expected a text with the unit H, such as '10 nH'"),
        ('smallest = "1.0 nH"', 'smallest = "-1.0 nH"',
         "inductor.smallest = '-1.0 nH': Input should be greater than 0"),
        ('smallest = "1.0 nH"', 'smallest = "nan H"',
         "inductor.smallest = 'nan H': expected a finite number with the unit H"),
        ("q_exponent = 0.5", "q_exponnt = 0.5",
         f"inductor.q_exponnt = 0.5: unknown key; nearest: q_exponent; allowed: {INDUCTOR_KEYS}"),
        ('smallest = "1.0 nH"', 'smallest = { value = "1.0 nH", bases = "x" }',
         "inductor.smallest = {'value': '1.0 nH', 'bases': 'x'}: expected a text with the unit H, such as '10 nH'"),
        ('smallest = "1.0 nH"', 'smallest = { value = "1.0 nH", basis = 3 }',
         "inductor.smallest.basis = 3: expected a text"),
        ('smallest = "1.0 nH"', 'smallest = "1.0 uH"', "inductor: smallest must be below largest"),
        ('grid = "E24"', 'grid = "E25"',
         "inductor.grid = 'E25': expected one of E3, E6, E12, E24, E48, E96, or a list of values in H, "
         "above zero and ascending"),
        ('grid = "E24"', 'grid = ["2 nH", "1 nH"]',
         "inductor.grid = ['2 nH', '1 nH']: expected one of E3, E6, E12, E24, E48, E96, or a list of values in H, "
         "above zero and ascending"),
        ('grid = "E24"', 'grid = ["0.5 nH", "2 nH"]',
         "inductor: every value of grid must lie between smallest and largest"),
        ("q = 40", 'q = "40"', "inductor.q = '40': Input should be a valid number"),
        ("q = 40", "q = true", "inductor.q = True: Input should be a valid number"),
        ("q = 40", "q = nan", "inductor.q = nan: Input should be a finite number"),
        ("q = 40", "q = 0", "inductor.q = 0: Input should be greater than 0"),
        ('tolerance = "5 %"', 'tolerance = "500 %"', "inductor.tolerance = '500 %': Input should be less than 1"),
        ('tolerance = "5 %"', 'tolerance = "0.5 dB"',
         "inductor.tolerance = '0.5 dB': expected a text with the unit %, such as '5 %'"),
        ("dissipation = 0.0003", "dissipation = -1",
         "capacitor.dissipation = -1: Input should be greater than or equal to 0"),
        ('stray_ok = "10 %"', 'stray_ok = "30 %"', "verdict: stray_ok must not exceed stray_marginal"),
        ("resonance_ok = 3.0", "resonance_ok = 1.0", "verdict: resonance_ok must not be below resonance_marginal"),
        ('grid = "E24"\ntolerance = "2 %"', 'grid = "continous"\ntolerance = "2 %"',
         "capacitor.grid = 'continous': expected one of E3, E6, E12, E24, E48, E96, continuous, or a list of values "
         "in F, above zero and ascending"),
        ('grid = "E24"', 'grid = "continuous"',
         "inductor.grid = 'continuous': expected one of E3, E6, E12, E24, E48, E96, or a list of values in H, "
         "above zero and ascending"),
        ('temperature = "100 ppm/K"', 'temperature = "100 ppm"',
         "inductor.temperature = '100 ppm': expected a text with the unit ppm/K, such as '30 ppm/K'"),
        ('temperature = "100 ppm/K"', 'temperature = "100000 ppm/K"',
         "inductor.temperature = '100000 ppm/K': Input should be less than 0.01"),
        ('current = "0.6 A"', 'current = "0.6 V"',
         "inductor.current = '0.6 V': expected a text with the unit A, such as '0.6 A'"),
        ('voltage = "50 V"', 'voltage = "0 V"', "capacitor.voltage = '0 V': Input should be greater than 0"),
        ("parallel = true", 'parallel = "yes"', "capacitor.parallel = 'yes': Input should be a valid boolean"),
        ('shared_via = "20 pH"', 'shared_via = "20 pF"',
         "board.shared_via = '20 pF': expected a text with the unit H, such as '10 nH'"),
        ('name = "chip-0603"', 'name = "chip-0603"\ntuned = 1', "tuned = 1: Input should be a valid boolean"),
        ('name = "chip-0603"', "name = 5", "name = 5: Input should be a valid string"),
        ('name = "chip-0603"', 'name = ""', "name = '': String should have at least 1 character"),
        ('name = "chip-0603"', "", "name is missing; it is required"),
    ],
)  # fmt: skip
def test_one_fault_one_sentence(tmp_path: Path, old: str, new: str, expected: str):
    assert old in BARE
    assert problems(tmp_path, BARE.replace(old, new, 1)) == (expected,)


def test_every_fault_of_a_file_is_told_at_once(tmp_path: Path):
    text = (
        BARE.replace("q = 40", "q = -1")
        .replace('via = "0.20 nH"', 'vias = "0.20 nH"')
        .replace("tuned = 3", "tuned = []")
    )
    assert problems(tmp_path, text) == (
        "inductor.q = -1: Input should be greater than 0",
        "board.via is missing; it is required",
        "board.vias = '0.20 nH': unknown key; nearest: via; allowed: via, pad, shared_via",
        "bandwidth.tuned = []: Input should be a valid number",
    )


def test_a_number_where_a_table_belongs(tmp_path: Path):
    found = problems(tmp_path, 'name = "x"\ntitle = "x"\ninductor = 5\ncapacitor = []\n')
    assert "inductor = 5: expected a table [inductor]" in found
    assert "capacitor = []: expected a table [capacitor]" in found
    assert "board is missing; it is required" in found


def test_an_empty_file_misses_every_table(tmp_path: Path):
    assert problems(tmp_path, "") == tuple(
        f"{key} is missing; it is required" for key in ("name", "title", "inductor", "capacitor", "board")
    )


def test_a_syntax_error_gives_line_and_column(tmp_path: Path):
    (found,) = problems(tmp_path, 'name = "x"\ntitle = = 3\n')
    assert "line 2, column" in found


def test_a_folder_bytes_and_a_name_that_is_no_kit(tmp_path: Path):
    with pytest.raises(KitError, match=r"is a folder; expected a TOML file"):
        load_kit(".", tmp_path)
    (tmp_path / "bytes.toml").write_bytes(b'name = "\xff"')
    with pytest.raises(KitError, match=r"is not UTF-8 text \(byte 8\)"):
        load_kit("bytes.toml", tmp_path)
    with pytest.raises(KitError) as caught:
        load_kit("chip-0630", tmp_path)
    assert str(caught.value) == (
        "kit = 'chip-0630': neither a shipped kit "
        "(air-wound, chip-0402, chip-0603, chip-0805, chip-1008, chip-trimmer) nor a kit file; nearest: chip-0603"
    )
    with pytest.raises(KitError, match="neither a shipped kit"):
        load_kit("", tmp_path)
