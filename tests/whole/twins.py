"""Three demos over ptys and sockets against their twins in virtual time: same seed, same drawn errors, so that what is
left between them is noise and the moment of each reading."""
import json
import os
import subprocess
import sys
import tempfile

program, source, twin = sys.argv[1], sys.argv[2], sys.argv[3]


def main():
    worst = 0.0
    for seed in (11, 12, 13):
        out = tempfile.mkdtemp(prefix="ls-twin-", dir="/tmp")
        env = dict(os.environ, LOADSTAIR_RUNTIME=os.path.join(out, "rt"), NO_COLOR="1")
        subprocess.run([program, "demo", "--out", out, "--seed", str(seed), "--headless"], env=env, check=True,
                       capture_output=True, timeout=300, stdin=subprocess.DEVNULL)
        shown = json.loads(subprocess.run([program, "show", "1", "--record", os.path.join(out, "record.db"), "--json"],
                                          env=env, check=True, capture_output=True, text=True).stdout)
        with open(os.path.join(out, "truth.json")) as text:
            truth = {step["label"]: step["efficiency"] for step in json.load(text)["steps"]}
        virtual = [json.loads(line) for line in
                   subprocess.run([twin, str(seed)], check=True, capture_output=True, text=True).stdout.splitlines()]
        assert [step["label"] for step in shown["steps"]] == [step["label"] for step in virtual]
        for real, twin_step in zip(shown["steps"], virtual):
            if real["kind"] not in ("level", "closure"):
                continue
            # The error of each, result minus truth: the same meters with the same drawn errors made both.
            error = real["efficiency"]["value"] - truth[real["label"]]
            twin_error = twin_step["efficiency"] - twin_step["true_efficiency"]
            half = (real["efficiency"]["high"] - real["efficiency"]["low"]) / 2
            share = abs(error - twin_error) / half
            worst = max(worst, share)
            print(f"seed {seed}, {real['label']}: error {error:+.6f}, twin {twin_error:+.6f}, "
                  f"apart by {share:.2f} of the interval's half-width {half:.6f}")
            # What differs is noise and the last digit of the typed voltage, 0.1 V of 385 V or 0.15 of a half-width.
            assert share < 0.2, "demo and virtual twin disagree beyond noise"
    print(f"three demos agree with their twins; largest difference {worst:.2f} of a half-width")


main()
