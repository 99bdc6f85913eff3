"""A scenario with every section, commented: what `faultassay forge --example` prints."""

from __future__ import annotations

EXAMPLE = """\
# A scenario of faultassay forge. Values are primary SI: V, A, ohm, H, F, s, Hz; voltages are phase to ground.
# Times are seconds after the first sample. What a section leaves out is absent or ideal.
#
# Any number may be a distribution, from which each record of a campaign draws its own:
#   { uniform = [low, high] }   { log_uniform = [low, high] }   { normal = [mean, deviation] }
#   { choice = [one, another] }, which fault types may be as well

title = "A feeder fault somewhere on the line, cleared after about 80 ms."

[record]
station = "Invented 20 kV"
device = "Recorder 1"
circuit = "Feeder 3"
format = "comtrade"             # or "csv"
revision = 1999                 # 1991, 1999, 2013
encoding = "binary"             # ascii, binary; with 2013 also binary32, float32, and combined = true
samples_per_cycle = 96          # or sample_rate_hz
duration_s = 0.35
start_time = 2031-03-04T06:12:40
channels = ["va", "vb", "vc", "ia", "ib", "ic", "in", "vn"]
names = { in = "I residual" }   # the others are called VA, IA and so on
current_unit = "A"              # or "kA"
voltage_unit = "kV"             # or "V"
side = "secondary"              # needs both ratios
current_ratio = { primary = 400, secondary = 1 }
voltage_ratio = { primary = 20000, secondary = 100 }
seed = 1                        # of all that is drawn

[network]
frequency_hz = 50
actual_frequency_hz = { normal = [50, 0.02] }

[network.source]                # behind the recorder's bus
voltage_rms_v = 11700
angle_deg = { uniform = [0, 360] }
# An impedance: r_ohm and x_ohm, one of them and x_over_r, magnitude_ohm and angle_deg, ...
z1 = { x_ohm = { log_uniform = [0.8, 4] }, x_over_r = { uniform = [8, 25] } }
z0 = { x_ohm = 1.6, x_over_r = 12 }
z2 = { x_ohm = 1.9, x_over_r = 12 }

[network.line]                  # protected by the recorder's terminal
length_km = 9
z1 = { r_ohm = 1.1, x_ohm = 3.2 }
z0 = { r_ohm = 2.6, x_ohm = 9.8 }

[network.adjacent]              # another feeder, for faults with side = "behind"
z1 = { r_ohm = 0.8, x_ohm = 2.0 }
z0 = { r_ohm = 2.0, x_ohm = 6.0 }

[network.remote]                # a second source, at the line's far end
voltage_rms_v = 11650
angle_deg = 0
z1 = { x_ohm = 60, x_over_r = 8 }
z0 = { x_ohm = 40, x_over_r = 8 }

[[network.loads]]
name = "village"
place = "end"                   # or "bus"
star = "open"                   # or "grounded"
z = { magnitude_ohm = 140, angle_deg = 18 }

[network.capacitor]             # a shunt bank at the bus
capacitance_f = 12e-6
r_ohm = 0.05
l_h = 150e-6
star = "open"                   # or "grounded"

[network.machine]               # its alternating current decays
kind = "induction"              # or "synchronous", with x_transient_ohm, x_synchronous_ohm, transient_open_s
emf_rms_v = 11300
emf_angle_deg = 0
r_ohm = 1.2
x_subtransient_ohm = 30
subtransient_open_s = 0.9
x_rotor_open_ohm = 400
place = "bus"

[network.converter]             # a source whose controls hold its current
current_rms_a = 60
angle_deg = 10
limit_rms_a = 75
limit_angle_deg = -50
delay_s = 0.002
response_s = 0.005

[network.transformer]           # saturating cores, switched in by do = "connect"
r_ohm = 4
air_core_h = 0.35
knee_flux_vs = 75
knee_current_a = 1.2
remanence_vs = [20, -12, -8]
place = "end"

# What happens, in order of time. Each event has time_s, or after_s from the event before it; fault, close and
# connect may have a point on wave instead: angle_deg and not_before_s. do is one of
#   fault  change  end  open  close  restrike  connect  disconnect  ramp

[[events]]
do = "fault"
type = { choice = ["AG", "BC", "ABG"] }
fraction = { uniform = [0.05, 0.95] }   # of the line, from the bus
angle_deg = { uniform = [-180, 180] }   # of the faulted loop's voltage; 0 rises through zero, 90 is the crest
not_before_s = 0.1
phase_resistance_ohm = 0.05
arc = { voltage_v = 300, ignition_a = 30 }

[[events]]
do = "change"                   # the fault takes another phase
type = "ABC"
after_s = 0.03

[[events]]
do = "open"                     # each pole at its own next current zero
breaker = "line"                # or "remote", "adjacent"
poles = "ABC"
after_s = { normal = [0.05, 0.004] }

[[events]]
do = "ramp"                     # the frequency of all sources moves
after_s = 0.02
lasts_s = 0.05
rate_hz_per_s = -0.5

# The instruments, in the order of the signal.

[[instruments.background]]
on = "voltage"
harmonic = 5
rms = 120

[instruments.ct]                # needs record.current_ratio
winding_ohm = 2
burden_ohm = 5
time_constant_s = 4             # or magnetising_h
core = "iron"                   # or "gapped"
knee = { voltage_v = 250, exciting_current_a = 0.05 }
remanence_pu = [{ uniform = [-0.6, 0.6] }, 0, 0]

[instruments.capacitive_vt]
capacitance_f = 90e-9
intermediate_voltage_v = 12000
burden_va = 150

[instruments.ct_class]          # or ct_errors = [{ ratio_percent = 0.4, phase_minutes = 12 }, {}, {}]
name = "5P"

[instruments.vt_class]
name = "3P"

[instruments.wiring]            # mistakes
reversed = []
exchanged = []
wrong_scale = { ic = 1.02 }

[instruments.anti_alias]
kind = "butterworth"            # or "rc"
order = 2
cutoff_hz = 1500

[instruments]
skew_s = { ib = 20e-6 }
skew_stated = true              # whether the record says so

[instruments.noise]
current_rms_a = 0.5
voltage_rms_v = 3

[instruments.converter]
bits = 16
current_range_a = 16000
voltage_range_v = 40000

[instruments.relay_filter]      # some relays store filtered samples
kind = "full-cycle-cosine"
keep_every = 1
applies_to = "currents"
"""
