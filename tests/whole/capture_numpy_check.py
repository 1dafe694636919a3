#!/usr/bin/python3
"""`loadstair capture` on the sample captures, against numpy on the same samples (1e-9; harmonics: of the largest line)
where the record holds whole cycles, else against the closed forms that the samples were made from.
Arguments: the program, the source folder. Exits 1 and says what differs."""
import json
import math
import pathlib
import subprocess
import sys

import numpy as np

PROGRAM = sys.argv[1]
SOURCE = pathlib.Path(sys.argv[2] if len(sys.argv) > 2 else ".").resolve()
SAMPLES = SOURCE / "sample-captures"
ORDERS = 40
differences = []
compared = 0


def check(what, got, wanted, tolerance):
    """Absolute tolerance; a figure that is no number differs."""
    global compared
    compared += 1
    if not isinstance(got, (int, float)) or not abs(got - wanted) <= tolerance:
        differences.append(f"{what}: program {got}, wanted {wanted} within {tolerance}")


def check_angle(what, got, wanted_deg, tolerance_deg):
    off = (got - wanted_deg + 180.0) % 360.0 - 180.0
    check(what, off, 0.0, tolerance_deg)


def capture(name, *options):
    done = subprocess.run([PROGRAM, "capture", str(SAMPLES / name), "--json", "--harmonics", str(ORDERS), *options],
                          capture_output=True, text=True, check=False)
    if done.returncode != 0:
        differences.append(f"{name}: exit status {done.returncode}: {done.stderr.strip()}")
        return None
    return json.loads(done.stdout)


def rows_of(name, first_row, separator=",", decimal="."):
    """The samples as numpy reads them: from row `first_row` (from 1) on, by a reader of three lines."""
    lines = (SAMPLES / name).read_bytes().decode("latin-1").splitlines()[first_row - 1:]
    return np.array([[float(field.replace(decimal, ".")) for field in line.strip(separator).split(separator)]
                     for line in lines if line])


def against_numpy(name, cycles, frequency_hz, interval_s, columns, data, scales):
    """Whole cycles from the first sample to the last: np.mean and np.fft are exact there."""
    options = ["--voltage", columns[0]] + (["--current", columns[1]] if len(columns) > 1 else [])
    result = capture(name, *options)
    if result is None:
        return
    check(f"{name} samples", result["samples"], len(data), 0)
    check(f"{name} cycles", result["cycles"], cycles, 0)
    check(f"{name} interval_s", result["interval_s"], interval_s, 1e-8 * interval_s)
    check(f"{name} frequency_hz", result["frequency_hz"], frequency_hz, 1e-7 * frequency_hz)
    waves = []
    for column, index, scale in zip(columns, range(data.shape[1] - len(columns), data.shape[1]), scales):
        x = data[:, index] * scale
        lines = np.fft.rfft(x) / len(x)
        rms_lines = np.sqrt(2.0) * np.abs(lines)[cycles::cycles][:ORDERS]
        waves.append((x, lines))
        channel = result["channels"][column]
        what = f"{name} {column}"
        rms = np.sqrt(np.mean(x**2))
        fundamental = rms_lines[0]
        check(f"{what} mean", channel["mean"], np.mean(x), 1e-9 * rms)
        check(f"{what} rms", channel["rms"], rms, 1e-9 * rms)
        check(f"{what} peak", channel["peak"], np.max(np.abs(x)), 1e-9 * rms)
        check(f"{what} crest_factor", channel["crest_factor"], np.max(np.abs(x)) / rms, 1e-9 * 2)
        check(f"{what} form_factor", channel["form_factor"], rms / np.mean(np.abs(x)), 1e-9 * 2)
        distortion = np.sqrt(np.sum(rms_lines[1:] ** 2))
        rest = np.sqrt(np.mean((x - np.mean(x))**2) - fundamental**2)
        check(f"{what} thd_f", channel["thd_f"], distortion / fundamental, 1e-9)
        check(f"{what} thd_r", channel["thd_r"], distortion / np.sqrt(np.sum(rms_lines**2)), 1e-9)
        # The square root of a small difference of squares carries their rounding.
        check(f"{what} total_distortion", channel["total_distortion"], rest / fundamental, 1e-9 + 1e-12 * rms / rest)
        check(f"{what} harmonics", len(channel["harmonics"]), ORDERS, 0)
        for line, wanted, phasor in zip(channel["harmonics"], rms_lines, lines[cycles::cycles]):
            order = line["order"]
            check(f"{what} order {order} rms", line["rms"], wanted, 1e-9 * fundamental)
            check(f"{what} order {order} share", line["share"], wanted / fundamental, 1e-9)
            if wanted > 1e-3 * fundamental:
                check_angle(f"{what} order {order} phase_deg", line["phase_deg"], math.degrees(np.angle(phasor)), 1e-5)
    if len(waves) < 2:
        return
    (v, v_lines), (i, i_lines) = waves
    active = np.mean(v * i)
    apparent = np.sqrt(np.mean(v**2)) * np.sqrt(np.mean(i**2))
    power = result["power"]
    check(f"{name} active_w", power["active_w"], active, 1e-9 * apparent)
    check(f"{name} apparent_va", power["apparent_va"], apparent, 1e-9 * apparent)
    check(f"{name} power_factor", power["power_factor"], active / apparent, 1e-9)
    check(f"{name} displacement_power_factor", power["displacement_power_factor"],
          math.cos(np.angle(v_lines[cycles]) - np.angle(i_lines[cycles])), 1e-9)
    # N^2 = S^2 - P^2: an error of 1e-12 S in P is one of 1e-12 S P / N in N.
    nonactive = math.sqrt(apparent**2 - active**2)
    check(f"{name} nonactive_var", power["nonactive_var"], nonactive, 1e-9 * apparent + 1e-12 * apparent * active / nonactive)


# --- Closed forms: the sines that the samples are made of (sample-captures/README.md) ---

VOLTAGE = {"mean": 0.15, "rms": 230.0, "phase": 0.0,
           "harmonics": {3: (0.012, 20.0), 5: (0.009, -75.0), 7: (0.005, 140.0), 11: (0.002, 35.0)}}
CURRENT = {"mean": -0.004, "rms": 2.05, "phase": -12.0,
           "harmonics": {3: (0.060, -160.0), 5: (0.035, 95.0), 7: (0.018, 10.0), 9: (0.008, -45.0)}}


def total_rms(wave):
    return math.sqrt(wave["mean"]**2 + wave["rms"]**2 * (1.0 + sum(s**2 for s, _ in wave["harmonics"].values())))


def active_power(v, i):
    p = v["mean"] * i["mean"] + v["rms"] * i["rms"] * math.cos(math.radians(v["phase"] - i["phase"]))
    for order in v["harmonics"].keys() & i["harmonics"].keys():
        (vs, vd), (cs, cd) = v["harmonics"][order], i["harmonics"][order]
        p += v["rms"] * vs * i["rms"] * cs * math.cos(math.radians(vd - cd))
    return p


def against_closed_form(name, frequency_hz, cycles, columns, tolerance):
    result = capture(name, "--voltage", columns[0], "--current", columns[1])
    if result is None:
        return
    check(f"{name} cycles", result["cycles"], cycles, 0)
    check(f"{name} frequency_hz", result["frequency_hz"], frequency_hz, tolerance * frequency_hz)
    for column, wave in zip(columns, (VOLTAGE, CURRENT)):
        channel = result["channels"][column]
        what = f"{name} {column}"
        distortion = math.sqrt(sum(s**2 for s, _ in wave["harmonics"].values()))
        check(f"{what} mean", channel["mean"], wave["mean"], tolerance * wave["rms"])
        check(f"{what} rms", channel["rms"], total_rms(wave), tolerance * wave["rms"])
        check(f"{what} thd_f", channel["thd_f"], distortion, tolerance)
        check(f"{what} thd_r", channel["thd_r"], distortion / math.sqrt(1.0 + distortion**2), tolerance)
        check(f"{what} total_distortion", channel["total_distortion"], distortion, tolerance)
        for line in channel["harmonics"]:
            share, degrees = wave["harmonics"].get(line["order"], (0.0, 0.0))
            if line["order"] == 1:
                share, degrees = 1.0, wave["phase"]
            check(f"{what} order {line['order']} share", line["share"], share, tolerance)
            if share > 0.0:
                # The sine's phase less 90 degrees is the cosine's.
                check_angle(f"{what} order {line['order']} phase_deg", line["phase_deg"], degrees - 90.0,
                            math.degrees(tolerance / share))
    power = result["power"]
    apparent = total_rms(VOLTAGE) * total_rms(CURRENT)
    check(f"{name} active_w", power["active_w"], active_power(VOLTAGE, CURRENT), tolerance * apparent)
    check(f"{name} apparent_va", power["apparent_va"], apparent, tolerance * apparent)
    check(f"{name} power_factor", power["power_factor"], active_power(VOLTAGE, CURRENT) / apparent, tolerance)
    check(f"{name} displacement_power_factor", power["displacement_power_factor"],
          math.cos(math.radians(VOLTAGE["phase"] - CURRENT["phase"])), tolerance)


def clipped_sine():
    """Of the voltage only bounds can be told: what the scope saw up to 300 V, and the whole sine above it."""
    name = "marten-c003-clipped.csv"
    result = capture(name, "--voltage", "Output voltage", "--current", "Output current")
    if result is None:
        return
    voltage = result["channels"]["Output voltage"]
    for figure in ("rms", "peak", "crest_factor"):
        if figure not in voltage["at_least"]:
            differences.append(f"{name}: {figure} is not marked as a lower bound")
    check(f"{name} peak", voltage["peak"], 300.0, 230.0 * math.sqrt(2.0) * math.sin(2 * math.pi / 200))
    # RMS of a sine of amplitude A cut at c: A^2 (a - sin(a) cos(a)) / pi + 2 c^2 / pi (pi/2 - a), with sin(a) = c/A.
    amplitude, level = 230.0 * math.sqrt(2.0), voltage["peak"]
    a = math.asin(level / amplitude)
    cut = math.sqrt(amplitude**2 * (a - math.sin(a) * math.cos(a)) / math.pi + 2 * level**2 / math.pi * (math.pi / 2 - a))
    check(f"{name} rms", voltage["rms"], cut, 1e-3 * 230.0)
    check(f"{name} current rms", result["channels"]["Output current"]["rms"], 2.0, 1e-6)
    check(f"{name} current crest_factor", result["channels"]["Output current"]["crest_factor"], math.sqrt(2.0), 1e-5)


def readme():
    """The answers that sample-captures/README.md prints are those of the closed forms."""
    text = (SAMPLES / "README.md").read_text(encoding="utf-8")
    apparent = total_rms(VOLTAGE) * total_rms(CURRENT)
    active = active_power(VOLTAGE, CURRENT)
    distortions = [math.sqrt(sum(s**2 for s, _ in wave["harmonics"].values())) for wave in (VOLTAGE, CURRENT)]
    small = active_power(dict(VOLTAGE, mean=0.0, rms=229.2, phase=31.0), dict(CURRENT, mean=0.0, rms=0.655, phase=12.0))
    for answer in (f"{total_rms(VOLTAGE):.4f} V", f"{total_rms(CURRENT):.6f} A", f"{active:.4f} W", f"{apparent:.4f} VA",
                   "%.4f %%, %.4f %%" % (100 * distortions[0], 100 * distortions[1]),
                   "%.6f, %.6f" % (active / apparent, math.cos(math.radians(12.0))), f"P = {small:.3f} W",
                   f"{math.cos(math.radians(19.0)):.6f}"):
        if answer not in text:
            differences.append(f"sample-captures/README.md does not print {answer}")


def refusals():
    """A broken file and a column that is not there: exit status 2, the place on stderr, nothing on stdout."""
    for arguments, wanted in [([str(SOURCE / "tests/broken/csv/gap.csv")], "gap.csv:11:1: "),
                              ([str(SAMPLES / "triangle-bare.csv"), "--voltage", "7"], "--voltage: there is no column")]:
        done = subprocess.run([PROGRAM, "capture", *arguments], capture_output=True, text=True, check=False)
        if done.returncode != 2 or wanted not in done.stderr or done.stdout:
            differences.append(f"capture {arguments}: exit status {done.returncode}, stderr {done.stderr!r}")


def main():
    written = subprocess.run(["/usr/bin/python3", str(SAMPLES / "make_samples.py"), "--check"], capture_output=True,
                             text=True, check=False)
    if written.returncode != 0:
        differences.append(written.stdout.strip() + written.stderr.strip())
    both = ("Output voltage", "Output current")
    against_numpy("marten-c003-460w.csv", 10, 50.0, 1e-4, both, rows_of("marten-c003-460w.csv", 9), (1.0, 1.0))
    against_numpy("marten-c003-460w-semicolon.csv", 10, 50.0, 1e-4, both,
                  rows_of("marten-c003-460w-semicolon.csv", 2, ";", ","), (1.0, 1.0))
    against_numpy("marten-d001-150w-tabs.csv", 6, 50.0, 5e-5, ("u_out", "i_out"),
                  rows_of("marten-d001-150w-tabs.csv", 7, "\t"), (1.0, 1e-3))
    against_numpy("marten-c003-460w-rate-above.csv", 10, 50.0, 62.5e-6, both,
                  rows_of("marten-c003-460w-rate-above.csv", 4), (1.0, 1.0))
    against_numpy("marten-c003-60-hz.csv", 12, 60.0, 1.0 / 12000.0, ("CH A", "CH B"),
                  rows_of("marten-c003-60-hz.csv", 3, "|"), (1.0, 1.0))
    against_numpy("marten-c003-8-bit.csv", 10, 50.0, 5e-5, both, rows_of("marten-c003-8-bit.csv", 3), (1.0, 1.0))
    against_numpy("stoat-ripple.csv", 20, 100e3, 1e-7, both, rows_of("stoat-ripple.csv", 4), (1.0, 1.0))
    against_numpy("triangle-bare.csv", 5, 50.0, 1e-4, ("column 2",), rows_of("triangle-bare.csv", 1), (1.0,))
    # Whole cycles end between samples there: 4e-6 of the fundamental is left at order 40, five samples a period.
    against_closed_form("marten-c003-50.7-hz.csv", 50.7, 12, ("v", "i"), 1e-5)
    # Printed to 1e-6 V and 1e-8 A.
    against_closed_form("marten-c003-3.5-cycles.csv", 50.0, 3, ("Volts", "Amps"), 1e-6)
    # Five samples of 2000 on the line between their neighbours.
    against_closed_form("marten-c003-blanks.csv", 50.0, 10, both, 1e-4)
    clipped_sine()
    refusals()
    readme()
    for difference in differences:
        print(difference)
    print(f"{compared} figures compared, {len(differences)} differ")
    sys.exit(1 if differences else 0)


if __name__ == "__main__":
    main()
