"""The commented scenario that `new` writes; it plans as it is.

A line that starts with ``#`` directly before a key is that key with a possible value, ready to be uncommented.
"""

TEMPLATE = """\
# A frequency-multiplier chain with its limits. Every quantity is text with its unit; upper and lower case count.
# `harmonic-planner plan THIS_FILE` plans it, `harmonic-planner schema` lists every key.
title = "25 MHz reference to a 150 MHz clock"

[source]
# One frequency, or the tuning span ["24.9 MHz", "25.1 MHz"].
frequency = "25 MHz"
level = "10 dBm"
# Lines the source brings along, by harmonic number ("1/2" where the oscillator itself multiplies).
lines = { "2" = "-35 dBc", "3" = "-40 dBc" }
# Single-sideband phase noise by offset; without it none is reported.
#phase_noise = { "1 kHz" = "-145 dBc/Hz", "100 kHz" = "-160 dBc/Hz" }

[output]
# Every unwanted line at the output must stay below this limit.
limit = "-50 dBc"
# The level you need; a warning tells where the chain misses it by more than 2 dB.
#level = "-10 dBm"
# Ranges in which another limit replaces the general one.
#mask = [{ from = "140 MHz", to = "160 MHz", limit = "-55 dBc" }]
# The same for ranges of the offset from the carrier, on both sides.
#offset_mask = [{ from = "0 Hz", to = "60 MHz", limit = "-60 dBc" }]
# An absolute limit, which stands beside the others.
#limit_dbm = "-55 dBm"

# What every filter is designed to; a stage may carry any of these keys for itself.
[design]
# Parts to build from: a shipped kit, a kit file of your own, or a list of these, the preferred one first.
kit = "chip-1008"
# Impedance between which the filters work.
impedance = "50 ohm"
# Filter families to choose from.
families = ["butterworth", "chebyshev"]
# Passband ripple of the Chebyshev filters.
ripple = "0.1 dB"
# Most resonators in one filter.
max_order = 9
# Number of resonators where it is fixed; without it the fewest that do.
#order = 5
# Loss at the worst point of span and drift, less the midband loss.
flatness = "1 dB"
# Midband loss of one filter, at most.
loss = "6 dB"
# Movement of a filter's centre as a whole, to either side.
drift = "1 %"
# Margin to every limit.
margin = "3 dB"
# "worst-case" adds the amplitudes of paths into one line, "average" their powers.
phases = "worst-case"
# Leakage past a filter, and of earlier carriers into a stage: 60 dB unshielded, 75 dB with a can, 90 dB in separate
# compartments, or "none".
isolation = "90 dB"
# Circuit: "auto", a name, or a list of names.
topology = "auto"
# Coupled resonators: their inductance where it is fixed, or their capacitance, as in "6 pF".
#resonator = "100 nH"
# true where the resonators are adjusted on the bench; narrower filters are then allowed.
tuned = false
# Narrowest bandwidth as a share of the centre; without it kit and tolerance decide.
#min_bandwidth = "15 %"
# Bandwidth where it is fixed, as a share of the centre; without it what every line and the parts allow.
#bandwidth = "20 %"
# Unloaded Q of a resonator; without it kit and topology decide.
#unloaded_q = 60
# Reflection factor of whatever faces a filter, 0 for no mismatch allowance; without it each neighbour's own.
#reflection = 0.5
# Spread of a multiplier's conversion into a reflective load; without it from the pad.
#termination = "1 dB"

# The stages in order: multiplier (device), pad, filter, pad_after, amplifier.
[[stage]]
name = "tripler"
# Factor; 1 is a plain clean-up stage without a device.
times = 3
# Pads before and behind the filter: they cost level and save rejection, since a filter reflects what it stops.
pad = "6 dB"
pad_after = "6 dB"
# "plan", "none", or one you have: { family = "chebyshev", order = 3, centre = "75 MHz", bandwidth = "20 %" },
# or as measured: { touchstone = "tripler.s2p" }, { table = "tripler.csv" } with columns frequency and rejection.
filter = "plan"
# Limit of every unwanted line at this stage's own output.
#limit = "-20 dBc"
# Another output, tapped behind this stage, with limits of its own as in [output].
#tap = { limit = "-20 dBc", mask = [{ from = "20 MHz", to = "60 MHz", limit = "-25 dBc" }] }

[stage.device]
# single-ended, push-push (even lines), push-pull (odd lines), limiter, or power-law.
type = "push-pull"
# Gain from carrier to wanted line, from the datasheet or the bench.
conversion = "-14 dB"
# Conduction half-angle, and how far the two sides cancel.
half_angle = "50 deg"
balance = "25 dB"
# What limits conversion in principle: resistive, reactive, or active.
class = "resistive"
# Levels the device is good for; the middle is its nominal drive.
drive = ["7 dBm", "13 dBm"]
# Lines from the datasheet, by harmonic of the input, relative to the wanted one; without them the waveform's hold.
#lines = { "1" = "-15 dBc", "2" = "-20 dBc", "5" = "-12 dBc" }

[stage.amplifier]
gain = "28 dB"
saturation = "14 dBm"
noise_figure = "4 dB"
# The amplifier's own harmonics, relative to its carrier.
lines = { "2" = "-30 dBc", "3" = "-35 dBc" }

[[stage]]
name = "doubler"
times = 2
pad = "6 dB"
pad_after = "6 dB"
# A device also fits on one line. There is no amplifier here: its harmonics would come behind the last filter.
device = { type = "push-push", half_angle = "70 deg", conversion = "-10 dB", drive = ["7 dBm", "13 dBm"] }
"""
