"""Scenarios that are refused, and the exact words; wordings are regression: our own."""

from scenario_documents import DEVICE, amplifier, device, document, given_filter, tap

from harmonic_planner.filters.topologies import ALIASES, REGISTRY
from harmonic_planner.parts.kits import kit_names

KITS = ", ".join(f'"{name}"' for name in kit_names())

REFUSED = {
    # missing
    "no source": '[output]\nlimit = "-60 dBc"\n[[stage]]\ntimes = 1',
    "no output": '[source]\nfrequency = "1 MHz"\n[[stage]]\ntimes = 1',
    "no stage": '[source]\nfrequency = "1 MHz"\n[output]\nlimit = "-60 dBc"',
    "empty stage list": 'stage = []\n[source]\nfrequency = "1 MHz"\n[output]\nlimit = "-60 dBc"',
    "no frequency": document(source=""),
    "no limit": document(output=""),
    "no times": document(stage=DEVICE),
    "no device": document(stage="times = 2"),
    "no device type": device('conversion = "-9 dB"'),
    "no conversion": device('type = "limiter"'),
    "no gain": amplifier(""),
    "tap without limit": tap(""),
    "offset mask without limit": document(output='offset_mask = [{ from = "1 MHz", to = "2 MHz" }]'),
    "mask without limit": document(output='mask = [{ from = "1 GHz", to = "2 GHz" }]'),
    "filter without order": given_filter('family = "butterworth", centre = "200 MHz", bandwidth = "10 %"'),
    # units and sizes
    "lower-case unit": document(source='frequency = "600 mhz"'),
    "no unit": document(source='frequency = "100"'),
    "number for frequency": document(source="frequency = 100e6"),
    "negative frequency": document(source='frequency = "-100 MHz"'),
    "zero frequency": document(source='frequency = "0 Hz"'),
    "NaN frequency": document(source='frequency = "NaN Hz"'),
    "infinite frequency": document(source='frequency = "inf MHz"'),
    "span upside down": document(source='frequency = ["101 MHz", "99 MHz"]'),
    "span of three": document(source='frequency = ["1 MHz", "2 MHz", "3 MHz"]'),
    "dB for dBm": document(source='frequency = "1 MHz"\nlevel = "10 dB"'),
    "TOML nan": document(source='frequency = "1 MHz"\nlevel = nan'),
    "limit above the carrier": document(output='limit = "60 dBc"'),
    "limit in dBm under the key for dBc": document(output='limit = "-30 dBm"'),
    "absolute limit in dBc": document(output='limit_dbm = "-30 dBc"'),
    "absolute limit as a number": document(output="limit_dbm = -30"),
    "category B": document(output='limit = "SM.329 category B"'),
    "category as a mask's limit": document(
        output='mask = [{ from = "1 GHz", to = "2 GHz", limit = "SM.329 category A" }]'
    ),
    "category as a stage's limit": document(stage=f'times = 2\n{DEVICE}\nlimit = "SM.329 category A"'),
    "negative offset": document(output='offset_mask = [{ from = "-1 MHz", to = "2 MHz", limit = "-60 dBc" }]'),
    "tap as a level": document(stage=f'times = 2\n{DEVICE}\ntap = "-60 dBc"'),
    "offset mask as one table": document(output='offset_mask = { from = "1 MHz", to = "2 MHz", limit = "-60 dBc" }'),
    "limit as a number": document(output="limit = -60"),
    "prefix on dB": document(design='loss = "3 mdB"'),
    "bare dB number": document(design="margin = 3"),
    "drift too large": document(design='drift = "21 %"'),
    "ripple too small": document(design='ripple = "0.001 dB"'),
    "half-angle too wide": device('type = "push-push", conversion = "-9 dB", half_angle = "181 deg"'),
    "isolation without unit": document(design="isolation = 75"),
    # kinds of value
    "times = 0": document(stage=f"times = 0\n{DEVICE}"),
    "times = 2.0": document(stage=f"times = 2.0\n{DEVICE}"),
    "times in quotes": document(stage=f'times = "2"\n{DEVICE}'),
    "times true": document(stage=f"times = true\n{DEVICE}"),
    "times with many digits": document(stage=f"times = {'9' * 100}\n{DEVICE}"),
    "order 10": document(design="max_order = 10"),
    "list where a number belongs": document(design="max_order = [9]"),
    "number where a table belongs": document(stage="times = 2\ndevice = 3"),
    "table where a level belongs": document(output='limit = { level = "-60 dBc" }'),
    "one family as text": document(design='families = "chebyshev"'),
    "no family": document(design="families = []"),
    "tuned in quotes": document(design='tuned = "yes"'),
    "reflection of one": document(design="reflection = 1"),
    "infinite q": document(design="unloaded_q = inf"),
    "title over lines": 'title = """a\nb"""\n' + document(),
    "date as title": "title = 2024-01-01\n" + document(),
    "stage as one table": document().replace("[[stage]]", "[stage]"),
    "drive as one level": device('type = "push-push", conversion = "-9 dB", drive = "7 dBm"'),
    "drive of no width": device('type = "push-push", conversion = "-9 dB", drive = ["7 dBm", "7 dBm"]'),
    # words
    "unknown device": device('type = "push-pul", conversion = "-9 dB"'),
    "unknown class": device('type = "push-push", conversion = "-9 dB", class = "passive"'),
    "unknown phases": document(design='phases = "worst"'),
    "unknown topology": document(design='topology = "lader"'),
    "auto in a list": document(design='topology = ["auto", "ladder"]'),
    "unknown kit": document(design='kit = "chip-0604"'),
    "unknown filter": document(stage=f'times = 2\n{DEVICE}\nfilter = "auto"'),
    "given filter, unknown family": given_filter(
        'family = "elliptic", order = 3, centre = "200 MHz", bandwidth = "10 %"'
    ),
    "unknown kit in a list": document(design='kit = ["chip-0603", "chip-0406"]'),
    "unknown kit of a stage": document(stage=f'times = 2\n{DEVICE}\nkit = ["gone.toml"]'),
    "kit twice": document(design='kit = ["chip-0603", "chip-0603"]'),
    "no kit": document(design="kit = []"),
    "number among the kits": document(design='kit = ["chip-0603", 3]'),
    # what is fixed
    "fixed order 0": document(design="order = 0"),
    "fixed order in quotes": document(design='order = "5"'),
    "fixed bandwidth in hertz": document(design='bandwidth = "60 MHz"'),
    "fixed bandwidth of zero": document(design='bandwidth = "0 %"'),
    "fixed bandwidth as a number": document(design="bandwidth = 0.15"),
    "resonator in ohms": document(design='resonator = "50 ohm"'),
    "resonator in lower case": document(design='resonator = "6 pf"'),
    "resonator of zero": document(design='resonator = "0 nH"'),
    "resonator as a number": document(design="resonator = 8e-9"),
    "order above max_order": document(design="order = 6\nmax_order = 5"),
    "order of a stage above max_order": document(design="max_order = 5", stage=f"times = 2\n{DEVICE}\norder = 6"),
    "max_order of a stage below the order": document(design="order = 6", stage=f"times = 2\n{DEVICE}\nmax_order = 5"),
    "bandwidth below min_bandwidth": document(
        design='min_bandwidth = "12 %"', stage=f'times = 2\n{DEVICE}\nbandwidth = "11.9 %"'
    ),
    "min_bandwidth of a stage above the bandwidth": document(
        design='bandwidth = "11.9 %"', stage=f'times = 2\n{DEVICE}\nmin_bandwidth = "12 %"'
    ),
    "inductance of a ladder's resonators": document(design='topology = "ladder"\nresonator = "8 nH"'),
    "capacitance of a ladder's resonators": document(
        design='topology = ["ladder-shunt", "ladder-series"]', stage=f'times = 2\n{DEVICE}\nresonator = "6 pF"'
    ),
    "capacitance of capacitively coupled resonators": document(
        stage=f'times = 2\n{DEVICE}\ntopology = ["capacitive", "ladder"]\nresonator = "6 pF"'
    ),
    "ladder where the inductance is fixed": document(
        design='resonator = "8 nH"', stage=f'times = 2\n{DEVICE}\ntopology = "ladder"'
    ),
    # lines
    "carrier among the lines": document(source='frequency = "1 MHz"\nlines = { "1" = "-10 dBc" }'),
    "line not in lowest terms": document(source='frequency = "1 MHz"\nlines = { "2/4" = "-10 dBc" }'),
    "source line above the carrier": document(source='frequency = "1 MHz"\nlines = { "2" = "3 dBc" }'),
    "fraction of a device": device('type = "push-push", conversion = "-9 dB", lines = { "1/2" = "-30 dBc" }'),
    "wanted line of a device": device('type = "push-push", conversion = "-9 dB", lines = { "2" = "-3 dBc" }'),
    "lines as a list": document(source='frequency = "1 MHz"\nlines = ["-40 dBc"]'),
    "offset twice": document(
        source='frequency = "1 MHz"\nphase_noise = { "1 kHz" = "-150 dBc/Hz", "1000 Hz" = "-140 dBc/Hz" }'
    ),
    # unknown keys
    "misspelt stage key": document(stage=f'name = "first"\ntimes = 2\n{DEVICE}\npaddd = "3 dB"'),
    "misspelt table": document() + "\n[sorce]\n",
    "hyphen for underscore": document(design='min-bandwidth = "10 %"'),
    "key of another table": document(design='pad = "3 dB"'),
    "level of a tap": tap('limit = "-60 dBc", level = "3 dBm"'),
    "unknown in an offset mask": document(
        output='offset_mask = [{ from = "1 GHz", to = "2 GHz", limit = "-60 dBc", side = "above" }]'
    ),
    "unknown in a mask": document(output='mask = [{ from = "1 GHz", to = "2 GHz", limit = "-60 dBc", level = 1 }]'),
    "spurs": document(source='frequency = "1 MHz"\nspurs = []'),
    "no file": given_filter('touchstone = "no such file.s2p"'),
    "no table": given_filter('table = "no such file.csv"'),
    "file as a number": given_filter("touchstone = 3"),
    "order of a measured filter": given_filter('touchstone = "no such file.s2p", order = 3'),
    "file and table": given_filter('touchstone = "no such file.s2p", table = "no such file.csv"'),
    "beyond the sweep": given_filter('table = "no such file.csv", beyond_sweep = "ignore"'),
    "measured": device('type = "push-push", conversion = "-9 dB", measured = "x.csv"'),
    # between keys
    "device in a clean-up stage": document(stage=f"times = 1\n{DEVICE}"),
    "half-angle of a limiter": device('type = "limiter", conversion = "-9 dB", half_angle = "60 deg"'),
    "balance of a single-ended device": device('type = "single-ended", conversion = "-9 dB", balance = "20 dB"'),
    "steepness of a push-push": device('type = "push-push", conversion = "-9 dB", steepness = 3'),
    "offset mask upside down": document(output='offset_mask = [{ from = "10 MHz", to = "10 MHz", limit = "-60 dBc" }]'),
    "mask of a tap upside down": tap('mask = [{ from = "2 GHz", to = "1 GHz", limit = "-60 dBc" }]'),
    "mask upside down": document(output='mask = [{ from = "2 GHz", to = "1 GHz", limit = "-60 dBc" }]'),
    "ripple above the flatness": document(design='ripple = "0.3 dB"\nflatness = "0.2 dB"'),
    "flatness of a stage below the ripple": document(stage=f'times = 2\n{DEVICE}\nflatness = "0.05 dB"'),
    "ripple of a stage above the flatness": document(
        design='flatness = "0.2 dB"', stage=f'times = 2\n{DEVICE}\nripple = "0.5 dB"'
    ),
    "bandwidth above the centre": given_filter(
        'family = "butterworth", order = 3, centre = "200 MHz", bandwidth = "201 MHz"'
    ),
    "ripple of a Butterworth": given_filter(
        'family = "butterworth", order = 3, centre = "200 MHz", bandwidth = "10 %", ripple = "0.1 dB"'
    ),
    "same name twice": document(
        stage=f'name = "a"\ntimes = 2\n{DEVICE}', more=f'[[stage]]\nname = "a"\ntimes = 2\n{DEVICE}'
    ),
    "name of a nameless stage": document(
        stage=f'name = "stage 2"\ntimes = 2\n{DEVICE}', more=f"[[stage]]\ntimes = 2\n{DEVICE}"
    ),
    "factor too large": document(stage=f"times = 12\n{DEVICE}", more=f"[[stage]]\ntimes = 12\n{DEVICE}\n" * 2),
    "factor too large in halves": document(
        source='frequency = "1 MHz"\nlines = { "1/2" = "-70 dBc" }',
        stage=f"times = 12\n{DEVICE}",
        more=f"[[stage]]\ntimes = 12\n{DEVICE}\n[[stage]]\ntimes = 5\n{DEVICE}\n",
    ),
    "too many stages": document(stage="times = 1", more="[[stage]]\ntimes = 1\n" * 12),
    # not TOML
    "empty": " \n",
    "comments alone": "# nothing\n",
    "unterminated text": '[source]\nfrequency = "100 MHz\n',
    "no value": "[source]\nfrequency =",
    "key twice": '[source]\nfrequency = "1 MHz"\nfrequency = "2 MHz"\n',
    "too many digits": "x = " + "9" * 5000,
    "too deep": "x = " + "[" * 100_000,
}


# What is allowed, where several cases share it.
SPAN = 'must be a frequency from 1 kHz to 1 THz, such as "600 MHz", or a span ["99 MHz", "101 MHz"], the lower first'
BAND = 'must be a frequency from 1 Hz to 1 THz, such as "60 MHz", or a percentage above 0 % up to 100 %, such as "10 %"'
FREQUENCY = 'must be a frequency from 1 kHz to 1 THz, such as "600 MHz"'
LIMIT = 'must be a level from -250 dBc to below 0 dBc, such as "-60 dBc"'
ANY_LIMIT = f'{LIMIT}, or "SM.329 category A"'
LIMIT_DBM = 'must be a level from -150 dBm to 80 dBm, such as "-30 dBm"'
OTHERS = "unless mask, offset_mask or limit_dbm is given"
LEVEL = 'must be a level from -150 dBm to 80 dBm, such as "10 dBm"'
TIMES = "must be a whole number from 1 to 12"
ORDER = "must be a whole number from 1 to 9"
FAMILY = 'must be one of "butterworth", "chebyshev"'
TYPE = 'must be one of "single-ended", "push-push", "push-pull", "limiter", "power-law"'
LINE = 'must be a line such as "2" or "1/2" in lowest terms, up to 100, and not "1", the carrier'
DRIVE = (
    'must be two levels ["7 dBm", "13 dBm"], the lower first, each a level from -150 dBm to 80 dBm, such as "10 dBm"'
)
FAMILIES = 'must be a list of one or more of "butterworth", "chebyshev", each at most once'
CIRCUITS = ", ".join(f'"{name}"' for name in (*REGISTRY, *ALIASES) if name != "auto")
TOPOLOGY = f'must be "auto", {CIRCUITS}, or a list of these names'
KIT = (
    "must be the name of a kit or of a kit file: one line of text of 1 to 200 characters, or a list of such, "
    "each at most once"
)
SHARE = 'must be "auto" or a percentage above 0 % up to 100 %, such as "10 %"'
RESONATOR = (
    'must be "auto" or an inductance from 10 pH to 100 mH, such as "8 nH", '
    'or a capacitance from 10 fF to 100 uF, such as "6 pF"'
)
STAGES = "must be one or more tables, each headed [[stage]] in double brackets"
SOURCE = 'must be a table: [source] with frequency = "100 MHz"'
OUTPUT = 'must be a table: [output] with limit = "-60 dBc"'
DEVICE_TABLE = 'must be a table, { type = "push-push", conversion = "-9 dB" }'
PLAIN = "write it as text with its unit"
EXPECTED = {
    "no source": [f"source: missing; {SOURCE}"],
    "no output": [f"output: missing; {OUTPUT}"],
    "no stage": [f"stage: missing; {STAGES}"],
    "empty stage list": ["stage: must be 1 to 12 tables [[stage]]; there are 0"],
    "no frequency": [f"source.frequency: missing; {SPAN}"],
    "no limit": [f"output.limit: missing; {ANY_LIMIT}, {OTHERS}"],
    "no times": [f"stage[1].times: missing; {TIMES}"],
    "no device": [f"stage[1].device: missing; {DEVICE_TABLE}, unless times is 1"],
    "no device type": [f"stage[1].device.type: missing; {TYPE}"],
    "no conversion": [
        'stage[1].device.conversion: missing; must be a gain from -80 dB to 40 dB, such as "-9 dB", '
        "except for power-law"
    ],
    "no gain": ['stage[1].amplifier.gain: missing; must be a gain from -40 dB to 80 dB, such as "20 dB"'],
    "tap without limit": [f"stage[1].tap.limit: missing; {ANY_LIMIT}, {OTHERS}"],
    "offset mask without limit": [f"output.offset_mask[1].limit: missing; {LIMIT}"],
    "mask without limit": [f"output.mask[1].limit: missing; {LIMIT}"],
    "filter without order": [f"stage[1].filter.order: missing; {ORDER}"],
    "lower-case unit": [
        (
            f'source.frequency = "600 mhz": {SPAN}; the unit "mhz" is not Hz or kHz or MHz or GHz or THz, '
            "upper and lower case count"
        )
    ],
    "no unit": [f'source.frequency = "100": {SPAN}; the unit is missing'],
    "number for frequency": [f"source.frequency = 100000000.0: {SPAN}; {PLAIN}"],
    "negative frequency": [f'source.frequency = "-100 MHz": {SPAN}'],
    "zero frequency": [f'source.frequency = "0 Hz": {SPAN}'],
    "NaN frequency": [f'source.frequency = "NaN Hz": {SPAN}; not a number followed by a unit'],
    "infinite frequency": [f'source.frequency = "inf MHz": {SPAN}; not a number followed by a unit'],
    "span upside down": [f'source.frequency = ["101 MHz", "99 MHz"]: {SPAN}; the first is above the second'],
    "span of three": [f'source.frequency = ["1 MHz", "2 MHz", "3 MHz"]: {SPAN}'],
    "dB for dBm": [f'source.level = "10 dB": {LEVEL}; the unit "dB" is not dBm, upper and lower case count'],
    "TOML nan": [f"source.level = nan: {LEVEL}; {PLAIN}"],
    "limit above the carrier": [f'output.limit = "60 dBc": {ANY_LIMIT}'],
    "limit in dBm under the key for dBc": [
        f'output.limit = "-30 dBm": {ANY_LIMIT}; the unit "dBm" is not dBc, upper and lower case count'
    ],
    "absolute limit in dBc": [
        f'output.limit_dbm = "-30 dBc": {LIMIT_DBM}; the unit "dBc" is not dBm, upper and lower case count'
    ],
    "absolute limit as a number": [f"output.limit_dbm = -30: {LIMIT_DBM}; {PLAIN}"],
    "category B": [f'output.limit = "SM.329 category B": {ANY_LIMIT}; not a number followed by a unit'],
    "category as a mask's limit": [
        f'output.mask[1].limit = "SM.329 category A": {LIMIT}; not a number followed by a unit'
    ],
    "category as a stage's limit": [f'stage[1].limit = "SM.329 category A": {LIMIT}; not a number followed by a unit'],
    "negative offset": [
        'output.offset_mask[1].from = "-1 MHz": must be an offset from 0 Hz to 1 THz, such as "10 MHz"'
    ],
    "tap as a level": ['stage[1].tap = "-60 dBc": must be a table, { limit = "-60 dBc" }'],
    "offset mask as one table": [
        'output.offset_mask = { from = "1 MHz", to = "2 MHz", limit = "-60 dBc" }: must be a list of tables, '
        '[{ from = "10 MHz", to = "100 MHz", limit = "-70 dBc" }]'
    ],
    "limit as a number": [f"output.limit = -60: {ANY_LIMIT}; {PLAIN}"],
    "prefix on dB": [
        (
            'design.loss = "3 mdB": must be a ratio above 0 dB up to 60 dB, such as "6 dB"; the unit "mdB" '
            "is not dB, upper and lower case count"
        )
    ],
    "bare dB number": [f'design.margin = 3: must be a ratio from 0 dB to 40 dB, such as "3 dB"; {PLAIN}'],
    "drift too large": ['design.drift = "21 %": must be a percentage from 0 % to 20 %, such as "1 %"'],
    "ripple too small": ['design.ripple = "0.001 dB": must be a ratio from 0.01 dB to 0.5 dB, such as "0.1 dB"'],
    "half-angle too wide": [
        ('stage[1].device.half_angle = "181 deg": must be an angle above 0 deg up to 180 deg, such as "70 deg"')
    ],
    "isolation without unit": [
        (f'design.isolation = 75: must be "none" or a ratio above 0 dB up to 200 dB, such as "75 dB"; {PLAIN}')
    ],
    "times = 0": [f"stage[1].times = 0: {TIMES}"],
    "times = 2.0": [f"stage[1].times = 2.0: {TIMES}"],
    "times in quotes": [f'stage[1].times = "2": {TIMES}; write it without quotes'],
    "times true": [f"stage[1].times = true: {TIMES}"],
    "times with many digits": [f"stage[1].times = a number of more than 60 digits: {TIMES}"],
    "order 10": [f"design.max_order = 10: {ORDER}"],
    "list where a number belongs": [f"design.max_order = [9]: {ORDER}"],
    "number where a table belongs": [f"stage[1].device = 3: {DEVICE_TABLE}"],
    "table where a level belongs": [f'output.limit = {{ level = "-60 dBc" }}: {ANY_LIMIT}'],
    "one family as text": [f'design.families = "chebyshev": {FAMILIES}'],
    "no family": [f"design.families = []: {FAMILIES}"],
    "tuned in quotes": ['design.tuned = "yes": must be true or false, without quotes'],
    "reflection of one": ["design.reflection = 1: must be a plain number from 0 to below 1"],
    "infinite q": ["design.unloaded_q = inf: must be a plain number from 1 to 1000000"],
    "title over lines": ['title = "a\\nb": must be a title: one line of text of 1 to 200 characters'],
    "date as title": ["title = 2024-01-01: must be a title: one line of text of 1 to 200 characters"],
    "stage as one table": [
        f'stage = {{ times = 2, device = {{ type = "push-push", conversion = "-9 dB" }} }}: {STAGES}'
    ],
    "drive as one level": [f'stage[1].device.drive = "7 dBm": {DRIVE}'],
    "drive of no width": [f'stage[1].device.drive = ["7 dBm", "7 dBm"]: {DRIVE}; both are the same'],
    "unknown device": [f'stage[1].device.type = "push-pul": {TYPE}; did you mean "push-pull"?'],
    "unknown class": ['stage[1].device.class = "passive": must be one of "resistive", "reactive", "active"'],
    "unknown phases": ['design.phases = "worst": must be one of "worst-case", "average"'],
    "unknown topology": [f'design.topology = "lader": {TOPOLOGY}; did you mean "ladder"?'],
    "auto in a list": [f'design.topology = ["auto", "ladder"]: {TOPOLOGY}'],
    "unknown kit": [f'design.kit = "chip-0604": must be {KITS} or the path of a kit file; did you mean "chip-0603"?'],
    "unknown kit in a list": [
        f'design.kit[2] = "chip-0406": must be {KITS} or the path of a kit file; did you mean "chip-0402"?'
    ],
    "unknown kit of a stage": [f'stage[1].kit[1] = "gone.toml": must be {KITS} or the path of a kit file; not found'],
    "kit twice": [f'design.kit = ["chip-0603", "chip-0603"]: {KIT}'],
    "no kit": [f"design.kit = []: {KIT}"],
    "number among the kits": [f'design.kit = ["chip-0603", 3]: {KIT}'],
    "fixed order 0": ['design.order = 0: must be "auto" or a whole number from 1 to 9'],
    "fixed order in quotes": [
        'design.order = "5": must be "auto" or a whole number from 1 to 9; write it without quotes'
    ],
    "fixed bandwidth in hertz": [
        f'design.bandwidth = "60 MHz": {SHARE}; the unit "MHz" is not %, upper and lower case count'
    ],
    "fixed bandwidth of zero": [f'design.bandwidth = "0 %": {SHARE}'],
    "fixed bandwidth as a number": [f"design.bandwidth = 0.15: {SHARE}; {PLAIN}"],
    "resonator in ohms": [
        (
            f'design.resonator = "50 ohm": {RESONATOR}; the unit "ohm" is not H or pH or nH or µH or mH, '
            "upper and lower case count"
        )
    ],
    "resonator in lower case": [
        (
            f'design.resonator = "6 pf": {RESONATOR}; the unit "pf" is not F or fF or pF or nF or µF, '
            "upper and lower case count"
        )
    ],
    "resonator of zero": [f'design.resonator = "0 nH": {RESONATOR}'],
    "resonator as a number": [f"design.resonator = 8e-09: {RESONATOR}; {PLAIN}"],
    "order above max_order": ["design.order = 6: must be at most max_order, 5"],
    "order of a stage above max_order": ["stage[1].order = 6: must be at most max_order, 5"],
    "max_order of a stage below the order": ["stage[1].max_order = 5: must be at least the order, 6"],
    "bandwidth below min_bandwidth": ['stage[1].bandwidth = "11.9 %": must be at least min_bandwidth, 12 %'],
    "min_bandwidth of a stage above the bandwidth": [
        'stage[1].min_bandwidth = "12 %": must be at most the bandwidth, 11.9 %'
    ],
    "inductance of a ladder's resonators": [
        ('design.resonator = "8 nH": must be left out for ladder: the inductance of its resonators is not free')
    ],
    "capacitance of a ladder's resonators": [
        (
            'stage[1].resonator = "6 pF": must be left out for ladder-shunt and ladder-series: the capacitance of '
            "its resonators is not free"
        )
    ],
    "capacitance of capacitively coupled resonators": [
        'stage[1].resonator = "6 pF": must be left out for capacitive and ladder: the capacitance of its resonators '
        "is not free"
    ],
    "ladder where the inductance is fixed": [
        (
            'stage[1].topology = "ladder": must name a circuit that leaves the inductance of resonators free, '
            'or resonator be "auto"'
        )
    ],
    "unknown filter": [
        'stage[1].filter = "auto": must be "plan", "none" or a table { family, order, centre, bandwidth }, '
        "{ touchstone } or { table }"
    ],
    "given filter, unknown family": [f'stage[1].filter.family = "elliptic": {FAMILY}'],
    "carrier among the lines": [f"source.lines.1: the key {LINE}"],
    "line not in lowest terms": [f'source.lines."2/4": the key {LINE}'],
    "source line above the carrier": [f'source.lines.2 = "3 dBc": {LIMIT}'],
    "fraction of a device": [
        'stage[1].device.lines."1/2": the key must be a harmonic number, a whole number from 1 to 100'
    ],
    "wanted line of a device": [
        (
            'stage[1].device.lines.2 = "-3 dBc": must be left out: it is the wanted line, to which the '
            "others are relative"
        )
    ],
    "lines as a list": ['source.lines = ["-40 dBc"]: must be a table, { "2" = "-40 dBc" }'],
    "offset twice": [
        ('source.phase_noise = { "1 kHz" = "-150 dBc/Hz", "1000 Hz" = "-140 dBc/Hz" }: must name each offset once')
    ],
    "misspelt stage key": ['stage[1].paddd: unknown key; did you mean pad? (stage "first")'],
    "misspelt table": ["sorce: unknown key; did you mean source?"],
    "hyphen for underscore": ["design.min-bandwidth: unknown key; did you mean min_bandwidth?"],
    "key of another table": ["design.pad: unknown key here; it belongs in [[stage]]"],
    "level of a tap": ["stage[1].tap.level: unknown key here; it belongs in [source] or in [output]"],
    "unknown in an offset mask": ["output.offset_mask[1].side: unknown key; known here: from, to, limit"],
    "unknown in a mask": ["output.mask[1].level: unknown key here; it belongs in [source] or in [output]"],
    "spurs": ["source.spurs: unknown key; known here: frequency, level, lines, phase_noise"],
    "no file": [
        'stage[1].filter.touchstone = "no such file.s2p": must be the path of a Touchstone file of two ports; there is '
        "no such file"
    ],
    "no table": [
        'stage[1].filter.table = "no such file.csv": must be the path of a CSV file with frequency and rejection; '
        "there is no such file"
    ],
    "file as a number": [
        "stage[1].filter.touchstone = 3: must be the path of a file: one line of text of 1 to 300 characters"
    ],
    "order of a measured filter": ["stage[1].filter.order: unknown key; known here: touchstone, beyond_sweep"],
    "file and table": ["stage[1].filter.table: unknown key; known here: touchstone, beyond_sweep"],
    "beyond the sweep": ['stage[1].filter.beyond_sweep = "ignore": must be one of "refuse", "no-rejection"'],
    "measured": [
        (
            "stage[1].device.measured: unknown key; known here: type, conversion, half_angle, balance, "
            "steepness, class, drive, lines, reflection"
        )
    ],
    "device in a clean-up stage": [
        (
            'stage[1].device = { type = "push-push", conversion = "-9 dB" }: must be left out where times '
            "is 1: a clean-up stage has no multiplier"
        )
    ],
    "half-angle of a limiter": [
        (
            'stage[1].device.half_angle = "60 deg": must be left out for limiter: it shapes single-ended, '
            "push-push and push-pull only"
        )
    ],
    "balance of a single-ended device": [
        ('stage[1].device.balance = "20 dB": must be left out for single-ended: it shapes push-push and push-pull only')
    ],
    "steepness of a push-push": [
        "stage[1].device.steepness = 3: must be left out for push-push: it shapes limiter only"
    ],
    "offset mask upside down": ['output.offset_mask[1].to = "10 MHz": must be above the range\'s lower end, from'],
    "mask of a tap upside down": ['stage[1].tap.mask[1].to = "1 GHz": must be above the range\'s lower end, from'],
    "mask upside down": ['output.mask[1].to = "1 GHz": must be above the range\'s lower end, from'],
    "ripple above the flatness": ['design.flatness = "0.2 dB": must be at least the ripple, 0.3 dB'],
    "flatness of a stage below the ripple": ['stage[1].flatness = "0.05 dB": must be at least the ripple, 0.1 dB'],
    "ripple of a stage above the flatness": ['stage[1].ripple = "0.5 dB": must be at most the flatness, 0.2 dB'],
    "bandwidth above the centre": ['stage[1].filter.bandwidth = "201 MHz": must be at most the centre frequency'],
    "ripple of a Butterworth": [
        'stage[1].filter.ripple = "0.1 dB": must be left out for butterworth: it has no ripple'
    ],
    "same name twice": [
        'stage[1].name = "a": must be a name that no other stage has',
        'stage[2].name = "a": must be a name that no other stage has',
    ],
    "name of a nameless stage": ['stage[1].name = "stage 2": must be a name that no other stage has'],
    "factor too large": ["stage: the factors multiply to 1728, must be at most 1024"],
    "factor too large in halves": ["stage: the factors multiply to 720, must be at most 512 with source lines in 1/2"],
    "too many stages": ["stage: must be 1 to 12 tables [[stage]]; there are 13"],
    "empty": ["is empty; `harmonic-planner new FILE` writes a scenario to start from"],
    "comments alone": [f"source: missing; {SOURCE}", f"output: missing; {OUTPUT}", f"stage: missing; {STAGES}"],
    "unterminated text": ["is not valid TOML: Illegal character '\\n' (at line 2, column 21)"],
    "no value": ["is not valid TOML: Invalid value (at line 2, column 12, the end of the file)"],
    "key twice": ["is not valid TOML: Cannot overwrite a value (at line 3, column 20)"],
    "too many digits": ["is not valid TOML: a number with too many digits"],
    "too deep": ["is not valid TOML: nested too deeply"],
}
