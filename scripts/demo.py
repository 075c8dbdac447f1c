#!/usr/bin/env python3
"""Install speclib in an environment of the repository's own and run the main job on the demo library."""

from __future__ import annotations

import json
import os
import shutil
import subprocess
import sys
import textwrap
from pathlib import Path

import _environment as env

OUTPUT = env.REPOSITORY / "demo_output"
MARK = "made_by_demo.txt"
DEMO = env.REPOSITORY / "demo_library"
ANALYST = "Demo Analyst"
LIBRARY = "bench.sqlite"


class Demo:
    """Tells the story and runs the commands, each printed before its output."""

    def __init__(self, program: Path) -> None:
        self.program = program
        self.surroundings = {**os.environ, "SPECLIB_ANALYST": ANALYST, "SPECLIB_LIBRARY": LIBRARY}

    def tell(self, text: str) -> None:
        """Print a paragraph of the story."""
        print("\n" + textwrap.fill(text, 100), flush=True)

    def run(self, *arguments: str) -> None:
        """Print and run a command in the output folder; a failure ends the demo."""
        shown = " ".join(f'"{a}"' if " " in a else a for a in arguments)
        print(f"\n$ speclib {shown}", flush=True)
        done = subprocess.run([str(self.program), *arguments], cwd=OUTPUT, env=self.surroundings, check=False)
        self._require(done.returncode, shown)

    def ask(self, *arguments: str) -> dict[str, object]:
        """Run a command for its JSON document, without showing it."""
        command = [str(self.program), *arguments, "--json"]
        done = subprocess.run(
            command, cwd=OUTPUT, env=self.surroundings, check=False, capture_output=True, text=True, encoding="utf-8"
        )
        self._require(done.returncode, " ".join(arguments))
        document: dict[str, object] = json.loads(done.stdout)
        return document

    def _require(self, status: int, shown: str) -> None:
        if status != 0:
            env.stop(f"The demo stopped: speclib {shown} ended with status {status}. Please report this.")


def fresh_output() -> None:
    """Empty the output folder, if it is the demo's own."""
    if OUTPUT.exists():
        if not (OUTPUT / MARK).is_file():
            env.stop(f"{OUTPUT.name}/ exists and was not made by the demo; move it away and run again.")
        shutil.rmtree(OUTPUT)
    OUTPUT.mkdir()
    (OUTPUT / MARK).write_text("This folder is emptied whenever scripts/demo.py runs.\n", "utf-8")
    for folder in ("spectra", "unknowns"):
        shutil.copytree(DEMO / folder, OUTPUT / folder)
    for name in ("manifest.csv", "assignments.csv"):
        shutil.copy(DEMO / name, OUTPUT / name)


def main() -> int:
    """Run the demo."""
    environment = env.Environment("demo")
    env.prepare(environment)
    fresh_output()
    demo = Demo(environment.program("speclib"))
    demo.tell(
        "An invented bench traces what recycled packaging gives off. All spectra here are invented; none is for "
        "identification. First the lab's own library: one command takes in the measured standards of a manifest, "
        "another the reasons that the analysts wrote down for the fragments."
    )
    demo.run("init", LIBRARY)
    demo.run("intake", "--manifest", "manifest.csv")
    demo.run("assign", "--from", "assignments.csv")
    demo.run("compound", "list")
    demo.tell(
        "Next month a peak turns up that no collection holds. It shows no molecular ion; a second measurement by "
        "chemical ionisation gave the nominal mass 286. Search by fragments that stay or move with the mass difference:"
    )
    demo.run("search", "unknowns/unknown_a.txt", "--mass", "286", "--measure", "shifted", "--top", "4")
    demo.tell(
        "Its nearest relatives are two adipates, 28 mass units (C2H4) above and below, so C16H30O4 is a fair "
        "hypothesis. Carry their assignments over; every proposal keeps its donors, checks and argument:"
    )
    demo.run("carry", "unknowns/unknown_a.txt", "--mass", "286", "--formula", "C16H30O4")
    accept = [
        str(p["id"])
        for p in demo.ask("case", "show", "1")["proposals"]  # type: ignore[attr-defined]
        if p["confidence"] >= 0.9
    ]
    demo.tell("The analyst accepts what convinces, each proposal by its number, and the library remembers who did it.")
    demo.run(
        "review", "1", *[word for number in accept for word in ("--accept", number)], "--reason", "both relatives agree"
    )
    demo.run("case", "show", "1")
    demo.tell("A stranger has no relative in this library. Nothing is carried to it, and speclib says so:")
    demo.run("carry", "unknowns/unknown_b.txt", "--no-save")
    demo.tell("Every change is in the trail, and the file can prove that nobody changed it on the side:")
    demo.run("history", "--limit", "5")
    demo.run("verify")
    where = os.path.relpath(demo.program)
    print(
        f"\nDone. The library is {OUTPUT.name}/{LIBRARY}. Next, try for yourself:\n"
        f'  {where} -L {OUTPUT.name}/{LIBRARY} compound show "dibutyl adipate"\n'
        f"  {where} -L {OUTPUT.name}/{LIBRARY} search {OUTPUT.name}/unknowns/unknown_b.txt\n"
        f"  {where} --help\n"
        "README.md shows how to start a library of your own."
    )
    return 0


if __name__ == "__main__":
    for stream in (sys.stdout, sys.stderr):
        stream.reconfigure(errors="replace")  # type: ignore[union-attr]
    raise SystemExit(main())
