"""The template of `new` and the published JSON Schema, against the reader itself."""

import re
import subprocess
import sys
import tomllib

import pytest
from scenario_documents import FULL, device, document, given_filter, read, tap
from scenario_refusals import REFUSED

from harmonic_planner.scenario import TEMPLATE, json_schema


def uncommented(text):
    """The template with every commented key put to use."""
    return re.sub(r"^#(?=\w)", "", text, flags=re.MULTILINE)


def test_template_is_read_and_says_what_it_is():
    scenario = read(TEMPLATE)
    assert [stage.times for stage in scenario.stages] == [3, 2]
    assert scenario.source.frequency_hz == (25e6, 25e6)
    assert scenario.output.limit_dbc == -50.0
    assert {stage.design.kits for stage in scenario.stages} == {("chip-1008",)}
    assert all(stage.pad_db == stage.pad_after_db == 6.0 for stage in scenario.stages)


def test_template_shows_nearly_every_key_and_each_works():
    given_keys = tomllib.loads(uncommented(TEMPLATE))
    assert read(uncommented(TEMPLATE)).output.level_dbm is not None
    definitions = json_schema()["$defs"]
    assert given_keys["design"].keys() | {"reflection"} == definitions["DesignTable"]["properties"].keys()
    assert given_keys["source"].keys() == definitions["SourceTable"]["properties"].keys()
    assert given_keys["output"].keys() == definitions["OutputTable"]["properties"].keys()
    first = given_keys["stage"][0]
    assert (
        first.keys() == definitions["StageTable"]["properties"].keys() - definitions["DesignTable"]["properties"].keys()
    )
    assert first["device"].keys() == definitions["DeviceTable"]["properties"].keys() - {"steepness", "reflection"}


def test_template_explains_its_keys():
    lines = TEMPLATE.splitlines()
    keys = [i for i, line in enumerate(lines) if re.match(r"#?\w+ = ", line)]
    unexplained = {lines[i].split(" = ")[0].lstrip("#") for i in keys if not lines[i - 1].startswith("# ")}
    obvious = {"title", "level", "name", "times", "pad", "pad_after", "gain", "saturation", "noise_figure", "balance"}
    assert unexplained <= obvious


def schema_faults(value, schema, root, place="$"):
    """Check `value` against the parts of JSON Schema that ours uses."""
    if "$ref" in schema:
        schema = {
            **root["$defs"][schema["$ref"].rpartition("/")[2]],
            **{k: v for k, v in schema.items() if k != "$ref"},
        }
    known = {"type", "pattern", "enum", "const", "properties", "required", "additionalProperties", "items", "anyOf"}
    known |= {"oneOf", "minItems", "maxItems", "uniqueItems", "minimum", "maximum", "exclusiveMinimum", "propertyNames"}
    known |= {"exclusiveMaximum", "minLength", "maxLength", "patternProperties", "description", "default", "examples"}
    faults = [f"{place}: unchecked keyword {key}" for key in schema.keys() - known if place != "$"]
    for branches in (schema[key] for key in ("anyOf", "oneOf") if key in schema):
        fits = any(not schema_faults(value, branch, root, place) for branch in branches)
        faults += [] if fits else [f"{place}: no branch fits {value!r}"]
    types = {"string": str, "number": int | float, "integer": int, "boolean": bool, "array": list, "object": dict}
    if "type" in schema and (
        not isinstance(value, types[schema["type"]]) or (isinstance(value, bool) and schema["type"] != "boolean")
    ):
        return [*faults, f"{place}: {value!r} is not {schema['type']}"]
    checks = {
        "pattern": lambda want: re.search(want, value) is not None,
        "enum": lambda want: value in want,
        "const": lambda want: value == want,
        "minimum": lambda want: value >= want,
        "maximum": lambda want: value <= want,
        "exclusiveMinimum": lambda want: value > want,
        "exclusiveMaximum": lambda want: value < want,
        "minLength": lambda want: len(value) >= want,
        "maxLength": lambda want: len(value) <= want,
        "minItems": lambda want: len(value) >= want,
        "maxItems": lambda want: len(value) <= want,
        "uniqueItems": lambda _: all(value.count(item) == 1 for item in value),
        "required": lambda want: set(want) <= value.keys(),
    }
    faults += [
        f"{place}: {value!r} against {key}" for key, ok in checks.items() if key in schema and not ok(schema[key])
    ]
    if isinstance(value, dict) and schema.keys() & {"properties", "patternProperties"}:
        for key, item in value.items():
            named = schema.get("properties", {}).get(key)
            inner = [named] if named else []
            inner += [s for p, s in schema.get("patternProperties", {}).items() if re.search(p, key)]
            if not inner:
                faults.append(f"{place}: unknown key {key}")
            for one in inner:
                faults += schema_faults(item, one, root, f"{place}.{key}")
    if isinstance(value, list) and "items" in schema:
        for item in value:
            faults += schema_faults(item, schema["items"], root, f"{place}[]")
    return faults


VALID = {
    "template": TEMPLATE,
    "template with all keys": uncommented(TEMPLATE),
    "everything": FULL,
    "least": document(),
    "isolation none": document(design='isolation = "none"\nmin_bandwidth = "kit"\ntopology = "ladder"'),
    "fixed": document(design='order = 3\nbandwidth = "9 %"\nresonator = "0.1 µH"\nkit = ["chip-0402", "chip-0603"]'),
    "resonators": document(design='topology = ["capacitive", "ladder"]\nresonator = "8 nH"'),
    "limits": document(output='limit = "SM.329 category A"\nlimit_dbm = "-30 dBm"'),
    "tap": tap('offset_mask = [{ from = "0 Hz", to = "1 GHz", limit = "-60 dBc" }]'),
    "power-law": device('type = "power-law"'),
    "given": given_filter('family = "butterworth", order = 3, centre = "200 MHz", bandwidth = "60 MHz"'),
}


@pytest.mark.parametrize("case", VALID)
def test_valid_documents_are_read_and_fit_the_schema(case):
    read(VALID[case])
    assert schema_faults(tomllib.loads(VALID[case]), json_schema(), json_schema()) == []


@pytest.mark.parametrize(
    "case",
    [
        "no source",
        "no times",
        "no gain",
        "lower-case unit",
        "number for frequency",
        "prefix on dB",
        "absolute limit in dBc",
        "category B",
        "category as a stage's limit",
        "offset mask without limit",
        "tap as a level",
        "times = 0",
        "times true",
        "order 10",
        "unknown device",
        "unknown topology",
        "misspelt stage key",
        "spurs",
        "fraction of a device",
        "reflection of one",
        "fixed order 0",
        "fixed order in quotes",
        "fixed bandwidth in hertz",
        "resonator in ohms",
        "kit twice",
        "no kit",
    ],
)
def test_schema_refuses_too(case):
    assert schema_faults(tomllib.loads(REFUSED[case]), json_schema(), json_schema()) != []


def test_schema_describes_every_key_and_shows_defaults_as_text():
    schema = json_schema()
    assert schema["$schema"] == "https://json-schema.org/draft/2020-12/schema"
    for table in [schema, *schema["$defs"].values()]:
        assert table["additionalProperties"] is False
        assert table["description"]
        for name, field in table["properties"].items():
            assert field.get("description"), name
    assert schema["$defs"]["DesignTable"]["properties"]["drift"]["default"] == "1 %"
    assert "default" not in schema["$defs"]["StageTable"]["properties"]["drift"]
    assert "null" not in str(schema)


def test_template_alone_needs_no_heavy_import():
    code = "import sys, harmonic_planner.template; print('pydantic' in sys.modules, 'numpy' in sys.modules)"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.split() == ["False", "False"]
