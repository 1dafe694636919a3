#!/usr/bin/python3
"""Writes the scope captures of this folder from closed forms: the Marten inverter and the Stoat converter on the north
bench, each in another habit of writing CSV. Run it here, without arguments; with --check it compares instead of
writing and exits 1 when a file differs. README.md gives the answers for each file."""
import math
import pathlib
import sys

import numpy as np

HERE = pathlib.Path(__file__).resolve().parent
ROOT2 = math.sqrt(2.0)

# Harmonics as (order, RMS as a share of the fundamental, phase in degrees of the sine).
VOLTAGE_HARMONICS = [(3, 0.012, 20.0), (5, 0.009, -75.0), (7, 0.005, 140.0), (11, 0.002, 35.0)]
CURRENT_HARMONICS = [(3, 0.060, -160.0), (5, 0.035, 95.0), (7, 0.018, 10.0), (9, 0.008, -45.0)]


def waveform(t_s, frequency_hz, rms, phase_deg, harmonics, mean=0.0):
    """mean + sum of sines; the fundamental has the RMS and phase given."""
    total = np.full_like(t_s, mean)
    for order, share, degrees in [(1, 1.0, phase_deg)] + harmonics:
        total += ROOT2 * rms * share * np.sin(2 * np.pi * order * frequency_hz * t_s + math.radians(degrees))
    return total


def marten(t_s, frequency_hz=50.0):
    """Output voltage and current of Marten C-003 at about 460 W."""
    voltage_v = waveform(t_s, frequency_hz, 230.0, 0.0, VOLTAGE_HARMONICS, mean=0.15)
    current_a = waveform(t_s, frequency_hz, 2.05, -12.0, CURRENT_HARMONICS, mean=-0.004)
    return voltage_v, current_a


def text(rows, line_end="\n"):
    return line_end.join(rows) + line_end


def comma_and_point():
    t_s = np.arange(2000) * 100e-6 - 0.02
    rows = ["Export of the north bench", '"Unit","Marten C-003"', '"Step","460 W, resistors"',
            "Record Length,2000,points", "Sample Interval,1.000000E-04,s", "",
            "Time,Output voltage,Output current", "s,V,A"]
    rows += ["%.6E,%.8E,%.8E" % row for row in zip(t_s, *marten(t_s))]
    return text(rows).encode()


def semicolon_and_comma():
    t_s = np.arange(2000) * 100e-6 - 0.02
    rows = ["Time (ms);Output voltage (V);Output current (A);"]
    rows += [("%.1f;%.6f;%.8f;" % (t * 1e3, v, i)).replace(".", ",") for t, v, i in zip(t_s, *marten(t_s))]
    return b"\xef\xbb\xbf" + text(rows, "\r\n").encode()


def tabs():
    t_s = np.arange(2400) * 50e-6
    voltage_v = waveform(t_s, 50.0, 229.2, 31.0, VOLTAGE_HARMONICS)
    current_a = waveform(t_s, 50.0, 0.655, 12.0, CURRENT_HARMONICS)
    rows = ["# north bench", "# unit: Marten D-001", "# step: 150 W", "# probes: 200:1 differential, 100 mV/A isolated",
            "t\tu_out\ti_out", "[ms]\t[V]\t[mA]"]
    rows += ["%.2f\t%.5f\t%.5f" % (t * 1e3, v, i * 1e3) for t, v, i in zip(t_s, voltage_v, current_a)]
    return text(rows).encode()


def interval_in_preamble():
    t_s = np.arange(3200) * 62.5e-6
    rows = ["Marten C-003, 460 W", "Sampling rate: 16 kSa/s", "Output voltage (V),Output current (A)"]
    rows += ["%.5f,%.7f" % row for row in zip(*marten(t_s))]
    return text(rows).encode()


def off_grid():
    t_s = np.arange(2500) * 100e-6
    rows = ["time,v,i", "s,V,A"]
    rows += ["%.4f,%.6f,%.8f" % row for row in zip(t_s, *marten(t_s, 50.7))]
    return text(rows).encode()


def three_and_a_half_cycles():
    t_s = np.arange(1750) * 40e-6
    rows = ["Seconds,Volts,Amps"]
    rows += ["%.5f,%.6f,%.8f" % row for row in zip(t_s, *marten(t_s))]
    return text(rows).encode()


def clipped():
    """The scope's range ends at 300 V: what lies beyond stands as an infinity."""
    t_s = np.arange(2000) * 100e-6
    voltage_v = waveform(t_s, 50.0, 230.0, 0.0, [])
    current_a = waveform(t_s, 50.0, 2.0, 0.0, [])
    rows = ["Time;Output voltage;Output current", "s;V;A"]
    for t, v, i in zip(t_s, voltage_v, current_a):
        shown = "inf" if v > 300.0 else "-inf" if v < -300.0 else "%.4f" % v
        rows.append("%.4f;%s;%.6f" % (t, shown, i))
    return text(rows).encode()


def blanks():
    """A few samples of the current are missing."""
    t_s = np.arange(2000) * 100e-6
    voltage_v, current_a = marten(t_s)
    rows = ["Time (s),Output voltage (V),Output current (A)"]
    for k, (t, v, i) in enumerate(zip(t_s, voltage_v, current_a)):
        rows.append("%.4f,%.6f,%s" % (t, v, "" if k % 400 == 137 else "%.8f" % i))
    return text(rows).encode()


def eight_bits():
    """Sines through an 8-bit converter: 3.2 V and 0.032 A a step, printed as the scope prints its steps."""
    t_s = np.arange(4000) * 50e-6
    voltage_v = waveform(t_s, 50.0, 230.0, 0.0, [])
    current_a = waveform(t_s, 50.0, 2.05, -12.0, [])
    rows = ["Time,Output voltage,Output current", "us,V,A"]
    rows += ["%d,%.1f,%.3f" % (round(t * 1e6), round(v / 3.2) * 3.2, round(i / 0.032) * 0.032)
             for t, v, i in zip(t_s, voltage_v, current_a)]
    return text(rows).encode()


def stoat_ripple():
    """Output of the Stoat: 12 V and 20 A with 0.1 % of triangular ripple at 100 kHz, 0.5 A of it in the current."""
    k = np.arange(2000)
    phase = (k % 100) / 100.0
    triangle = 4.0 * np.abs(phase - 0.5) - 1.0
    rows = ["Stoat, output at 240 W", "Vertical Units,V,A", "Time (\u00b5s),Output voltage,Output current"]
    rows += ["%.1f,%.6f,%.5f" % (n * 0.1, 12.0 + 0.012 * r, 20.0 + 0.5 * r) for n, r in zip(k, triangle)]
    return text(rows).encode("latin-1")


def sixty_hertz():
    t_s = np.arange(2400) / 12000.0
    rows = ["x-axis|CH A|CH B", "second|Volt|Ampere"]
    rows += ["%.9f|%.6f|%.8f" % row for row in zip(t_s, *marten(t_s, 60.0))]
    return text(rows).encode()


def bare_triangle():
    """No words at all: a triangle of 10 V peak at 50 Hz."""
    k = np.arange(1000)
    triangle = 10.0 * (1.0 - 4.0 * np.abs((k / 200.0 + 0.25) % 1.0 - 0.5))
    return "\n".join("%.4f,%.3f" % (n * 1e-4, v) for n, v in zip(k, triangle)).encode()


FILES = {
    "marten-c003-460w.csv": comma_and_point,
    "marten-c003-460w-semicolon.csv": semicolon_and_comma,
    "marten-d001-150w-tabs.csv": tabs,
    "marten-c003-460w-rate-above.csv": interval_in_preamble,
    "marten-c003-50.7-hz.csv": off_grid,
    "marten-c003-3.5-cycles.csv": three_and_a_half_cycles,
    "marten-c003-clipped.csv": clipped,
    "marten-c003-blanks.csv": blanks,
    "marten-c003-8-bit.csv": eight_bits,
    "marten-c003-60-hz.csv": sixty_hertz,
    "stoat-ripple.csv": stoat_ripple,
    "triangle-bare.csv": bare_triangle,
}


def main():
    check = sys.argv[1:] == ["--check"]
    different = []
    for name, make in FILES.items():
        content = make()
        path = HERE / name
        if not check:
            path.write_bytes(content)
        elif not path.exists() or path.read_bytes() != content:
            different.append(name)
    for name in different:
        print(f"{name}: is not what make_samples.py writes")
    sys.exit(1 if different else 0)


if __name__ == "__main__":
    main()
