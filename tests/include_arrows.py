# SPDX-License-Identifier: GPL-3.0-or-later
"""Checks that rooms include only what the room table of DEVELOPERS.md allows, and that the top level holds nothing else."""
import pathlib
import re
import subprocess
import sys

ROOT = pathlib.Path(__file__).resolve().parent.parent
BASE = {"ident"}  # failure, axis, loop names, files, strict JSON: plain values every room may use
IDENT = {"ident/vehicle", "ident/flight_log", "ident/spectra", "ident/models", "ident/fitting", "ident/loops"}
ALLOWED = {
    "ident": set(),
    "ident/vehicle": set(),
    "ident/flight_log": {"ident/vehicle"},
    "ident/spectra": set(),
    "ident/models": {"ident/spectra"},
    "ident/fitting": {"ident/models", "ident/spectra"},
    "ident/loops": {"ident/fitting", "ident/models", "ident/spectra"},
    "excitation/signals": set(),
    "excitation/schedule": {"excitation/signals"} | IDENT,
    "excitation/rehearsal": {"excitation/schedule", "excitation/signals"} | IDENT,
    "reports": {"excitation/schedule", "excitation/rehearsal", "excitation/signals"} | IDENT,
    "ident/commands": {"excitation/schedule", "excitation/rehearsal", "excitation/signals", "reports"} | IDENT,
}
TOP_LEVEL = {"CMakeLists.txt", "README.md", "DEVELOPERS.md", "ident", "excitation", "reports", "tests", "datasets", "scripts"}


def main():
    faults = []
    tracked = subprocess.run(["git", "ls-files"], cwd=ROOT, capture_output=True, text=True, check=True).stdout.split()
    for name in sorted({path.split("/")[0] for path in tracked}):
        if name not in TOP_LEVEL and not name.startswith("."):
            faults.append(f"top level: {name} does not belong there")
    checked = 0
    for source in sorted(p for room in ("ident", "excitation", "reports") for p in (ROOT / room).rglob("*")
                         if p.suffix in (".h", ".cpp") and "node_modules" not in p.parts):
        room = source.parent.relative_to(ROOT).as_posix()
        if room not in ALLOWED:
            faults.append(f"{source.relative_to(ROOT)}: {room} is not a room")
            continue
        checked += 1
        for included in re.findall(r'#include "([^"]+)"', source.read_text(encoding="utf-8")):
            target = str(pathlib.PurePosixPath(included).parent)
            if target not in ALLOWED[room] | BASE | {room} and (ROOT / included).exists():
                faults.append(f"{source.relative_to(ROOT)}: includes {included}, against the arrows of the rooms")
    for fault in faults:
        print(fault)
    print(f"include arrows: {checked} files checked, {len(faults)} faults")
    return 1 if faults or checked == 0 else 0


sys.exit(main())
