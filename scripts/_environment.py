"""Make and reuse a virtual environment of the repository; only the standard library of Python 3.11 or newer is needed.

An environment counts only when its stamp names the present inputs, and the stamp is written last: an installation that
was interrupted is done again.
"""

from __future__ import annotations

import hashlib
import importlib.util
import os
import shutil
import subprocess
import sys
from dataclasses import dataclass
from pathlib import Path
from typing import NoReturn

REPOSITORY = Path(__file__).resolve().parents[1]
CONSTRAINTS = REPOSITORY / "scripts" / "constraints.txt"
OLDEST_PYTHON = (3, 11)
DOWNLOAD_MB = {"demo": 240, "test": 270}
"""Sum of the wheels that pip fetches into an empty cache on Linux x86-64 with CPython 3.11, rounded up.

Measured with `pip download -c scripts/constraints.txt` of the dependencies in pyproject.toml; other systems differ a
little.
"""


@dataclass(frozen=True)
class Environment:
    """A virtual environment under `.venv/`, with the extras of the project that it gets."""

    name: str
    extras: tuple[str, ...] = ()

    @property
    def folder(self) -> Path:
        """Where it lies."""
        return REPOSITORY / ".venv" / self.name

    @property
    def programs(self) -> Path:
        """The folder of its programs."""
        return self.folder / ("Scripts" if os.name == "nt" else "bin")

    def program(self, name: str) -> Path:
        """The path of one of its programs."""
        return self.programs / (f"{name}.exe" if os.name == "nt" else name)

    @property
    def stamp(self) -> Path:
        """The file that says what was installed."""
        return self.folder / "installed.txt"


def stop(message: str) -> NoReturn:
    """End with one sentence on stderr and exit status 1."""
    print(message, file=sys.stderr)
    raise SystemExit(1)


def require_python() -> None:
    """End with a sentence when Python is too old or lacks a module that environments need."""
    if sys.version_info < OLDEST_PYTHON:
        stop(f"speclib needs Python 3.11 or newer; this is {sys.version.split()[0]}. Run this script with a newer one.")
    for module in ("venv", "ensurepip"):
        if importlib.util.find_spec(module) is None:
            stop(
                f"This Python has no module '{module}'. "
                "On Debian or Ubuntu: sudo apt install python3-venv; elsewhere install Python from python.org. "
                "Then run this script again."
            )


def _digest(files: list[Path], *words: str) -> str:
    digest = hashlib.sha256("|".join(words).encode())
    for path in files:
        digest.update(path.relative_to(REPOSITORY).as_posix().encode())
        digest.update(path.read_bytes())
    return digest.hexdigest()


def dependencies_digest(environment: Environment) -> str:
    """Identity of what pip installs besides the project: declared dependencies, pins, extras and Python."""
    # The folder belongs to it: programs of an environment name their place, so a moved one is made anew.
    return _digest([REPOSITORY / "pyproject.toml", CONSTRAINTS], *environment.extras, sys.version, str(REPOSITORY))


def build_requirements() -> list[str]:
    """What pyproject.toml needs to build the project."""
    import tomllib  # Missing before Python 3.11, which require_python tells first.

    requires: list[str] = tomllib.loads((REPOSITORY / "pyproject.toml").read_text("utf-8"))["build-system"]["requires"]
    return requires


def sources_digest() -> str:
    """Identity of the project's own files, as far as they are installed."""
    sources = sorted(p for p in (REPOSITORY / "speclib").rglob("*") if p.is_file() and "__pycache__" not in p.parts)
    return _digest([REPOSITORY / "pyproject.toml", REPOSITORY / "README.md", *sources])


def prepare(environment: Environment) -> None:
    """Make the environment ready: create, install, or only install the project anew when its files changed.

    Ends the script with a sentence when that fails.
    """
    require_python()
    try:
        _prepare(environment)
    except KeyboardInterrupt:
        print("Stopped; the next run begins where a whole step was finished.", file=sys.stderr)
        raise SystemExit(130) from None


def _prepare(environment: Environment) -> None:
    wanted = (dependencies_digest(environment), sources_digest())
    held = tuple(environment.stamp.read_text("utf-8").split()) if environment.stamp.is_file() else ()
    if held == wanted:
        print(f"Using the environment {_shown(environment.folder)}.", flush=True)
        return
    project = f"{REPOSITORY}[{','.join(environment.extras)}]" if environment.extras else str(REPOSITORY)
    if held[:1] == wanted[:1]:
        environment.stamp.unlink()
        print("The sources changed: installing the project anew ...", flush=True)
        _pip(
            environment, "install", "--quiet", "--no-deps", "--force-reinstall", "--no-build-isolation", str(REPOSITORY)
        )
    else:
        print(
            f"Making the environment {_shown(environment.folder)}: "
            f"about {DOWNLOAD_MB[environment.name]} MB will be downloaded unless pip has them in its cache. "
            "This happens once.",
            flush=True,
        )
        shutil.rmtree(environment.folder, ignore_errors=True)
        _create(environment)
        # The build backend stays in the environment, so that changed sources are installed without the network.
        _pip(environment, "install", "-c", str(CONSTRAINTS), *build_requirements())
        _pip(environment, "install", "-c", str(CONSTRAINTS), "--no-build-isolation", project)
    environment.stamp.write_text("\n".join(wanted) + "\n", "utf-8")


def _shown(path: Path) -> str:
    return path.relative_to(REPOSITORY).as_posix()


def _create(environment: Environment) -> None:
    made = subprocess.run([sys.executable, "-m", "venv", str(environment.folder)], check=False)
    if made.returncode != 0:
        stop(
            "The virtual environment could not be made (see above). On Debian or Ubuntu: "
            "sudo apt install python3-venv; then run this script again."
        )


def _pip(environment: Environment, *arguments: str) -> None:
    command = [str(environment.program("python")), "-m", "pip", "--disable-pip-version-check", *arguments]
    surroundings = {name: value for name, value in os.environ.items() if name not in ("PYTHONPATH", "PYTHONHOME")}
    done = subprocess.run(command, env=surroundings, check=False)
    if done.returncode != 0:
        stop(
            "pip could not install what is needed (see above). Check the internet connection and the free disk space "
            "(about 1.5 GB), then run this script again; what was downloaded is kept in "
            "pip's cache."
        )
