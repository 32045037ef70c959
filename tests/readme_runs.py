# SPDX-License-Identifier: GPL-3.0-or-later
"""Runs the `$ hoverwright ...` lines of README.md in order and compares what they print, numbers aside.

usage: readme_runs.py README.md PROGRAM
"""
import pathlib
import re
import subprocess
import sys
import tempfile

NUMBER = re.compile(r"[-+]?\d+(\.\d+)?(e[-+]?\d+)?")


def shape(line):
    """The line with numbers and runs of blanks made alike: numbers differ between compilers, words must not."""
    return re.sub(r"\s+", " ", NUMBER.sub("#", line)).strip()


def sessions(readme):
    """(command, shown lines) of every line that starts with `$ hoverwright` in a fenced block."""
    found = []
    for block in re.findall(r"```console\n(.*?)```", readme, flags=re.S):
        for line in block.splitlines():
            if line.startswith("$ "):
                found.append((line[2:], []))
            elif found and line.strip() not in ("", "..."):
                found[-1][1].append(line)
    return [s for s in found if s[0].startswith("hoverwright ")]


def main():
    readme, program = pathlib.Path(sys.argv[1]).read_text(encoding="utf-8"), sys.argv[2]
    faults = 0
    runs = sessions(readme)
    with tempfile.TemporaryDirectory() as folder:
        for command, shown in runs:
            run = subprocess.run(f"'{program}' {command.split(' ', 1)[1]}", shell=True, cwd=folder, text=True,
                                 stdout=subprocess.PIPE, stderr=subprocess.STDOUT)
            printed = [shape(line) for line in run.stdout.splitlines()]
            if run.returncode != 0:
                print(f"`{command}` ended with {run.returncode}:\n{run.stdout}")
                faults += 1
            for line in shown:
                if shape(line) not in printed:
                    print(f"`{command}` does not print: {line}")
                    faults += 1
    print(f"README: {len(runs)} commands run, {faults} faults")
    return 1 if faults or not runs else 0


sys.exit(main())
