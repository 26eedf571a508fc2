"""What is shipped is whole: wheel and sdist, installed away from the tree, find their tables."""

from __future__ import annotations

import os
import subprocess
import sys
import sysconfig
import tarfile
import venv
from pathlib import Path
from zipfile import ZipFile

import pytest

ROOT = Path(__file__).resolve().parents[1]


def run(*command: str | Path, cwd: Path) -> str:
    env = {name: value for name, value in os.environ.items() if not name.startswith(("PYTHON", "PIP_"))}
    done = subprocess.run(command, cwd=cwd, env=env, capture_output=True, text=True, timeout=300, check=False)
    assert done.returncode == 0, f"{command}\n{done.stdout}\n{done.stderr}"
    return done.stdout


@pytest.fixture(scope="module")
def built(tmp_path_factory: pytest.TempPathFactory) -> dict[str, Path]:
    """Wheel and sdist, made without a network."""
    folder = tmp_path_factory.mktemp("dist")
    run(sys.executable, "-m", "build", "--no-isolation", "--outdir", folder, ROOT, cwd=folder)
    return {"wheel": next(folder.glob("*.whl")), "sdist": next(folder.glob("*.tar.gz"))}


def test_the_wheel_holds_every_table_and_no_tests(built: dict[str, Path]) -> None:
    with ZipFile(built["wheel"]) as wheel:
        names = set(wheel.namelist())
    tables = {f"purity/data/{path.name}" for path in (ROOT / "purity" / "data").iterdir() if path.is_file()}
    assert tables
    assert tables <= names
    assert "purity/py.typed" in names
    assert not any(name.startswith(("tests/", "scenarios/")) for name in names)


def test_the_sdist_holds_tests_scenarios_and_licence(built: dict[str, Path]) -> None:
    with tarfile.open(built["sdist"]) as sdist:
        names = {name.split("/", 1)[1] for name in sdist.getnames() if "/" in name}
    wanted = {"LICENSE", "README.md", "DEVELOPERS.md", "pyproject.toml", "tests/test_packaging.py"}
    wanted |= {f"scenarios/{path.name}" for path in (ROOT / "scenarios").glob("*.toml")}
    assert wanted <= names


@pytest.mark.parametrize("kind", ["wheel", "sdist"])
def test_an_installed_copy_finds_its_tables(built: dict[str, Path], kind: str, tmp_path: Path) -> None:
    """A new environment that sees the dependencies of this one, but no other copy of the package."""
    place = tmp_path / "env"
    venv.create(place, with_pip=False, symlinks=os.name != "nt")
    scripts = place / ("Scripts" if os.name == "nt" else "bin")
    python = scripts / "python"
    own = Path(
        run(python, "-c", "import sysconfig; print(sysconfig.get_path('purelib'))", cwd=tmp_path).strip()
    )
    shared = {sysconfig.get_path("purelib"), sysconfig.get_path("platlib")}
    (own / "shared.pth").write_text("\n".join(sorted(shared)) + "\n", encoding="utf-8")
    pip = (
        sys.executable,
        "-m",
        "pip",
        "--python",
        python,
        "install",
        "-q",
        "--no-deps",
        "--no-build-isolation",
    )
    run(*pip, "--ignore-installed", "--no-index", built[kind], cwd=tmp_path)
    where = run(python, "-c", "import purity; print(purity.__file__)", cwd=tmp_path)
    assert Path(where.strip()).is_relative_to(own)
    assert "no fault" in run(scripts / "purity", "data", "verify", cwd=tmp_path)
