"""Environments are made once, made again when their inputs change, and never believed in when half-made."""

from __future__ import annotations

import importlib.util
import sys
from pathlib import Path
from types import ModuleType
from typing import Any

import pytest

SCRIPTS = Path(__file__).parents[2] / "scripts"


@pytest.fixture
def env(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> ModuleType:
    spec = importlib.util.spec_from_file_location("_environment_under_test", SCRIPTS / "_environment.py")
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    monkeypatch.setitem(sys.modules, spec.name, module)
    spec.loader.exec_module(module)
    (tmp_path / "scripts").mkdir()
    (tmp_path / "speclib").mkdir()
    for name in ("pyproject.toml", "README.md", "scripts/constraints.txt", "speclib/a.py"):
        (tmp_path / name).write_text('[build-system]\nrequires = ["hatchling"]\n', encoding="utf-8")
    monkeypatch.setattr(module, "REPOSITORY", tmp_path)
    monkeypatch.setattr(module, "CONSTRAINTS", tmp_path / "scripts" / "constraints.txt")
    return module


@pytest.fixture
def installs(env: ModuleType, monkeypatch: pytest.MonkeyPatch) -> list[tuple[str, ...]]:
    """What pip would have been asked to do; nothing is installed."""
    calls: list[tuple[str, ...]] = []
    monkeypatch.setattr(env, "_create", lambda environment: environment.folder.mkdir(parents=True))
    monkeypatch.setattr(env, "_pip", lambda _environment, *arguments: calls.append(arguments))
    return calls


def test_a_second_run_installs_nothing(env: Any, installs: list[Any], capsys: pytest.CaptureFixture[str]) -> None:
    env.prepare(env.Environment("demo"))
    assert "MB will be downloaded" in capsys.readouterr().out
    env.prepare(env.Environment("demo"))
    assert len(installs) == 2
    assert "Using the environment .venv/demo" in capsys.readouterr().out


def test_changed_sources_reinstall_the_project_only(env: Any, installs: list[Any], tmp_path: Path) -> None:
    env.prepare(env.Environment("demo"))
    (tmp_path / "speclib" / "a.py").write_text("changed", encoding="utf-8")
    env.prepare(env.Environment("demo"))
    assert "--no-deps" in installs[-1]


def test_changed_pins_make_the_environment_anew(env: Any, installs: list[Any], tmp_path: Path) -> None:
    env.prepare(env.Environment("demo"))
    (tmp_path / "scripts" / "constraints.txt").write_text("other", encoding="utf-8")
    env.prepare(env.Environment("demo"))
    assert "--no-deps" not in installs[-1]


def test_an_interrupted_installation_is_done_again(
    env: Any, installs: list[Any], monkeypatch: pytest.MonkeyPatch
) -> None:
    def interrupted(*_: object) -> None:
        raise KeyboardInterrupt

    with monkeypatch.context() as patch:
        patch.setattr(env, "_pip", interrupted)
        with pytest.raises(SystemExit) as stopped:
            env.prepare(env.Environment("demo"))
        assert stopped.value.code == 130
    env.prepare(env.Environment("demo"))
    assert len(installs) == 2


@pytest.mark.parametrize("missing", ["venv", "ensurepip"])
def test_a_missing_module_is_said_with_its_cure(
    env: Any, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str], missing: str
) -> None:
    find = importlib.util.find_spec
    monkeypatch.setattr(importlib.util, "find_spec", lambda name: None if name == missing else find(name))
    with pytest.raises(SystemExit) as stopped:
        env.require_python()
    assert stopped.value.code == 1
    said = capsys.readouterr().err
    assert missing in said
    assert "apt install python3-venv" in said


def test_an_old_python_is_told(env: Any, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> None:
    monkeypatch.setattr(env, "OLDEST_PYTHON", (99, 0))
    with pytest.raises(SystemExit):
        env.require_python()
    assert "Python 3.11 or newer" in capsys.readouterr().err


def test_every_dependency_is_pinned() -> None:
    import tomllib

    project = tomllib.loads((SCRIPTS.parent / "pyproject.toml").read_text(encoding="utf-8"))["project"]
    wanted = [*project["dependencies"], *project["optional-dependencies"]["test"]]
    pinned = {
        line.split("==")[0].lower().replace("_", "-")
        for line in (SCRIPTS / "constraints.txt").read_text(encoding="utf-8").splitlines()
        if "==" in line
    }
    names = {item.split(">")[0].split("=")[0].split("<")[0].lower() for item in wanted}
    assert names <= pinned, names - pinned
