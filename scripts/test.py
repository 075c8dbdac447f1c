#!/usr/bin/env python3
"""Run every check in an environment of the repository's own; what follows `--` goes to pytest."""

from __future__ import annotations

import os
import shutil
import subprocess
import sys
import tarfile
from pathlib import Path

import _environment as env

OUTSIDE_LIST = env.REPOSITORY / "scripts" / "outside_data.txt"


def fetch_outside_data(environment: env.Environment) -> Path:
    """Fetch the files that tests are held against and that are never committed; pinned by SHA-256, fetched once."""
    folder = env.REPOSITORY / ".venv" / "outside_data"
    done = folder / "complete.txt"
    wanted = OUTSIDE_LIST.read_text("utf-8")
    if done.is_file() and done.read_text("utf-8") == wanted:
        return folder
    print("Fetching the outside check data (about 4 MB) ...", flush=True)
    shutil.rmtree(folder, ignore_errors=True)
    folder.mkdir(parents=True)
    command = [str(environment.program("python")), "-m", "pip", "--disable-pip-version-check", "download", "--no-deps"]
    command += ["--no-binary", ":all:", "--require-hashes", "-r", str(OUTSIDE_LIST), "-d", str(folder)]
    if subprocess.run(command, check=False).returncode != 0:
        env.stop(
            "The outside check data could not be fetched (see above); check the internet connection and run again."
        )
    for archive in folder.glob("*.tar.gz"):
        with tarfile.open(archive) as opened:
            _unpack(opened, folder)
    done.write_text(wanted, "utf-8")
    return folder


def _unpack(archive: tarfile.TarFile, folder: Path) -> None:
    """Write the plain files of an archive, inside the folder only; the filter of tarfile came with Python 3.11.4."""
    root = folder.resolve()
    for member in archive:
        content = archive.extractfile(member) if member.isfile() else None
        if content is None:
            continue
        target = (root / member.name).resolve()
        if not target.is_relative_to(root):
            env.stop(f"The outside check data hold {member.name!r}, which lies outside their folder; nothing is used.")
        target.parent.mkdir(parents=True, exist_ok=True)
        target.write_bytes(content.read())


def main(arguments: list[str]) -> int:
    """Run all checks, also after one failed; return the exit status."""
    environment = env.Environment("test", ("test",))
    env.prepare(environment)
    extra = arguments[arguments.index("--") + 1 :] if "--" in arguments else []
    surroundings = {
        **{name: value for name, value in os.environ.items() if name not in ("PYTHONPATH", "PYTHONHOME")},
        "SPECLIB_OUTSIDE_DATA": str(fetch_outside_data(environment)),
        "SPECLIB_REQUIRE_OUTSIDE_DATA": "1",
        "PYTHONSAFEPATH": "1",
    }
    checks: dict[str, list[Path | str]] = {
        "ruff check": [environment.program("ruff"), "check", "."],
        "ruff format": [environment.program("ruff"), "format", "--check", "."],
        "mypy": [environment.program("mypy")],
        "pytest": [environment.program("pytest"), *extra],
    }
    outcomes = {}
    for name, command in checks.items():
        print(f"\n== {name}", flush=True)
        done = subprocess.run([str(c) for c in command], cwd=env.REPOSITORY, env=surroundings, check=False)
        outcomes[name] = done.returncode
    failed = [name for name, status in outcomes.items() if status != 0]
    summary = ", ".join(f"{name} {'failed' if name in failed else 'ok'}" for name in outcomes)
    print(f"\n== checks: {summary}", flush=True)
    if failed:
        print(f"Look at the first failure above, then run again: python3 scripts/test.py   (only: {', '.join(failed)})")
        return 1
    print("All checks passed. Next: python3 scripts/demo.py shows the main job on the demo library.")
    return 0


if __name__ == "__main__":
    raise SystemExit(main(sys.argv[1:]))
