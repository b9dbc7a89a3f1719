"""The built wheel: it carries all that the command needs, and runs in an empty environment."""

from __future__ import annotations

import subprocess
import sys
import venv
import zipfile
from pathlib import Path

import pytest

ROOT = Path(__file__).parent.parent.parent


@pytest.fixture(scope="module")
def wheel(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Return the wheel of this repository, built without network."""
    pytest.importorskip("build", reason="belongs to the extra dev")
    pytest.importorskip("hatchling", reason="builds the wheel without network")
    folder = tmp_path_factory.mktemp("wheel")
    command = [sys.executable, "-m", "build", "--wheel", "--no-isolation", "--outdir", str(folder), str(ROOT)]
    done = subprocess.run(command, capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stdout + done.stderr
    (built,) = folder.glob("*.whl")
    return built


def test_wheel_carries_workflow_configuration_demo_and_types(wheel: Path) -> None:
    """Every file of workflow/ and config/ and of the package is in the wheel; tests and checks are not."""
    with zipfile.ZipFile(wheel) as archive:
        names = set(archive.namelist())
    for folder in ("workflow", "config"):
        wanted = {
            f"bandcairn/{path.relative_to(ROOT).as_posix()}"
            for path in (ROOT / folder).rglob("*")
            if path.is_file() and "__pycache__" not in path.parts
        }
        assert wanted <= names
    sources = {
        path.relative_to(ROOT / "src").as_posix()
        for path in (ROOT / "src" / "bandcairn").rglob("*")
        if path.is_file() and "__pycache__" not in path.parts
    }
    assert sources <= names
    assert {"bandcairn/py.typed", "bandcairn/demo/study.yaml"} <= names
    assert not any(name.startswith(("tests/", "reference_checks/")) for name in names)
    assert any(name.endswith("licenses/LICENSE") for name in names)


@pytest.mark.slow
def test_wheel_in_an_empty_environment_runs_the_demo(wheel: Path, tmp_path: Path) -> None:
    """Installed with its dependencies alone, from nothing: `bandcairn demo` ends with exit code 0."""
    venv.create(tmp_path / "venv", with_pip=True)
    binaries = tmp_path / "venv" / "bin"
    subprocess.run([str(binaries / "pip"), "install", "-q", str(wheel)], check=True)
    done = subprocess.run(
        [str(binaries / "bandcairn"), "demo", str(tmp_path / "demo")],
        capture_output=True,
        text=True,
        check=False,
        cwd=tmp_path,
        env={"PATH": str(binaries), "HOME": str(tmp_path)},
    )
    assert done.returncode == 0, done.stdout + done.stderr
    assert (tmp_path / "demo" / "results" / "statistics.csv").is_file()
