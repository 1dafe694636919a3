"""Every broken file through the program itself: the exact message on standard error, exit status 2, nothing printed
as a result; and the sound files pass."""
import os
import subprocess
import sys

program, source = sys.argv[1], sys.argv[2]
broken = os.path.join(source, "tests", "broken")


def run(folder, *arguments):
    env = dict(os.environ, NO_COLOR="1")
    return subprocess.run([program, *arguments], cwd=os.path.join(broken, folder), env=env, capture_output=True,
                          text=True, timeout=60)


def expected(folder):
    with open(os.path.join(broken, folder, "expected.txt"), encoding="utf-8") as lines:
        for line in lines:
            line = line.rstrip("\n")
            if not line or line.startswith("#"):
                continue
            if "\t" in line:
                name, message = line.split("\t", 1)
            else:
                name, message = line.split(":", 1)[0], line
            yield name, message


def arguments_for(folder, name):
    if folder == "hookup":
        return ["check", name, "--offline"]
    if folder == "stair":
        return ["check", "bench.hookup.json", name, "--offline"]
    return ["capture", name]


def main():
    causes = set()
    count = 0
    for folder in ("hookup", "stair", "csv"):
        for name, message in expected(folder):
            done = run(folder, *arguments_for(folder, name))
            if message == "read without complaint":
                assert done.returncode in (0, 1) and done.stderr == "", f"{folder}/{name}: {done.stderr}"
                continue
            assert done.returncode == 2, f"{folder}/{name}: exit status {done.returncode}\n{done.stdout}{done.stderr}"
            assert done.stderr == message + "\n", f"{folder}/{name}:\n  wanted {message!r}\n  got    {done.stderr!r}"
            assert done.stdout == "", f"{folder}/{name}: printed {done.stdout!r}"
            count += 1
            causes.add(message.split(": ", 1)[-1])
    assert len(causes) >= 30, "too few different causes"
    sound = run("stair", "check", "bench.hookup.json", "sound.stair.json", "--offline")
    assert sound.returncode in (0, 1), sound.stderr
    print(f"{count} broken files refused with {len(causes)} different causes, exit status 2")

    # 5 milliohm at 20 A are 2 W of the Stoat's 240 W: check speaks up about leads that nobody declared.
    samples = os.path.join(source, "sample-captures")
    checked = subprocess.run([program, "check", "stoat.hookup.json", "stoat.stair.json", "--offline"], cwd=samples,
                             capture_output=True, text=True, timeout=60)
    print(checked.stdout)
    assert "5 milliohm" in checked.stdout and "2.00 W of 240 W" in checked.stdout, checked.stdout
    marten = subprocess.run([program, "check", "north_bench.hookup.json", "marten.stair.json", "--offline"], cwd=samples,
                            capture_output=True, text=True, timeout=60)
    print(marten.stdout)
    assert marten.returncode == 0, marten.stdout + marten.stderr
    for caution in ("prove dead", "emergency stop", "earth", "ammeter", "category"):
        assert caution in marten.stdout, f"check says nothing of: {caution}"

    wrong = subprocess.run([program, "capture", "--no-such-option"], capture_output=True, text=True, timeout=60)
    assert wrong.returncode == 2, wrong.returncode
    for command in ("demo", "daemon", "run", "rehearse", "check", "runs", "show", "capture"):
        help_text = subprocess.run([program, command, "--help"], capture_output=True, text=True, timeout=60)
        assert help_text.returncode == 0 and "Example:" in help_text.stdout, command


main()
