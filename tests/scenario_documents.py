"""Scenario documents that the tests of the scenario share."""

from pathlib import Path

from harmonic_planner.scenario import loads

HERE = Path("chain.toml")
DEVICE = 'device = { type = "push-push", conversion = "-9 dB" }'


def document(
    *, source='frequency = "100 MHz"', output='limit = "-60 dBc"', design="", stage=f"times = 2\n{DEVICE}", more=""
):
    """A valid scenario but for the tables that are given."""
    return f"[source]\n{source}\n[output]\n{output}\n[design]\n{design}\n[[stage]]\n{stage}\n{more}\n"


def device(keys):
    return document(stage=f"times = 2\ndevice = {{ {keys} }}")


def given_filter(keys):
    return document(stage=f"times = 2\n{DEVICE}\nfilter = {{ {keys} }}")


def amplifier(keys):
    return document(stage=f"times = 2\n{DEVICE}\namplifier = {{ {keys} }}")


def tap(keys):
    return document(stage=f"times = 2\n{DEVICE}\ntap = {{ {keys} }}")


def read(text):
    return loads(text, path=HERE)


FULL = """
title = "everything"
[source]
frequency = ["99 MHz", "101 MHz"]
level = "7 dBm"
lines = { "2" = "-40 dBc", "1/2" = "-70 dBc" }
phase_noise = { "100 kHz" = "-165 dBc/Hz", "1 kHz" = "-150 dBc/Hz" }
[output]
level = "3 dBm"
limit = "-70 dBc"
mask = [{ from = "2.3 GHz", to = "2.5 GHz", limit = "-75 dBc" }]
offset_mask = [{ from = "0 Hz", to = "10 MHz", limit = "-80 dBc" }]
limit_dbm = "-50 dBm"
[design]
impedance = "75 Ω"
kit = ["chip-1008", "air-wound"]
families = ["chebyshev"]
ripple = "0.2 dB"
max_order = 5
order = 4
bandwidth = "12.5 %"
flatness = "0.5 dB"
loss = "4 dB"
drift = "2 %"
margin = "6 dB"
phases = "average"
isolation = "90 dB"
reflection = 0.5
termination = "1.5 dB"
unloaded_q = 100
min_bandwidth = "10 %"
topology = ["ladder-shunt"]
resonator = "auto"
tuned = true
[[stage]]
name = "first"
times = 2
pad = "3 dB"
pad_after = "2 dB"
limit = "-30 dBc"
impedance = "50 ohm"
isolation = "none"
topology = "auto"
min_bandwidth = "kit"
kit = "chip-0805"
order = "auto"
bandwidth = "auto"
resonator = "6 pF"
[stage.tap]
limit = "SM.329 category A"
limit_dbm = "-40 dBm"
mask = [{ from = "1 GHz", to = "2 GHz", limit = "-20 dBc" }]
[stage.device]
type = "push-push"
half_angle = "75 deg"
balance = "30 dB"
conversion = "-9 dB"
class = "active"
drive = ["7 dBm", "13 dBm"]
lines = { "1" = "-25 dBc", "4" = "5 dBc" }
reflection = 0.6
[stage.filter]
family = "chebyshev"
order = 3
centre = "200 MHz"
bandwidth = "10 %"
topology = "ladder-series"
unloaded_q = 80
[stage.amplifier]
gain = "20 dB"
saturation = "13 dBm"
noise_figure = "4 dB"
lines = { "2" = "-30 dBc" }
reflection = 0.2
[[stage]]
times = 1
filter = "none"
[[stage]]
times = 3
device = { type = "limiter", conversion = "-10 dB", steepness = 4 }
"""
