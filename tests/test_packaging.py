"""The wheel holds what git holds, and works away from the clone.

The wheel is built once, from a copy of the tracked files in a temporary folder, so
that leftovers of an earlier build can neither enter it nor stay in the tree. It is
built without isolation (setuptools comes with the ``dev`` extra): no network needed.
"""

import os
import shutil
import subprocess
import sys
import tomllib
import zipfile
from pathlib import Path

import pytest
from repository import FOLDERS, ROOT, tracked_files

BESIDES = ("pyproject.toml", "README.md", "LICENSE")
READ_ALL_JOBS = """
from pitchsweep.configs import reader
names = reader.shipped_names("jobs")
jobs = [reader.read_job("demo:" + name).job.job for name in names]
print(reader.__file__, *jobs, sep="\\n")
"""


@pytest.fixture(scope="module")
def wheel(tmp_path_factory: pytest.TempPathFactory) -> Path:
    source = tmp_path_factory.mktemp("source")
    for name in tracked_files(*FOLDERS, *BESIDES):
        (source / name).parent.mkdir(parents=True, exist_ok=True)
        shutil.copyfile(ROOT / name, source / name)
    out = tmp_path_factory.mktemp("dist")
    command = [sys.executable, "-m", "build", "--wheel", "--no-isolation"]
    built = subprocess.run(
        [*command, "--outdir", str(out), str(source)], capture_output=True, text=True
    )
    assert built.returncode == 0, built.stdout + built.stderr
    (path,) = out.glob("*.whl")
    return path


def _held(wheel: Path) -> set[str]:
    with zipfile.ZipFile(wheel) as archive:
        return {n for n in archive.namelist() if ".dist-info/" not in n}


def test_the_wheel_holds_what_git_holds(wheel: Path) -> None:
    tracked = {f"pitchsweep/{name}" for name in tracked_files(*FOLDERS)}
    assert _held(wheel) == tracked


def test_the_wheel_holds_every_kind_of_file(wheel: Path) -> None:
    held = _held(wheel)
    for folder in FOLDERS:
        assert f"pitchsweep/{folder}/py.typed" in held
    assert "pitchsweep/configs/jobs/shims.yaml" in held
    assert "pitchsweep/drivers/twin/__init__.py" in held


def test_the_wheel_carries_the_licence_and_the_command(wheel: Path) -> None:
    with zipfile.ZipFile(wheel) as archive:
        info = [n for n in archive.namelist() if ".dist-info/" in n]
        assert any(n.endswith("licenses/LICENSE") for n in info)
        (entry,) = [n for n in info if n.endswith("entry_points.txt")]
        assert b"pitchsweep = pitchsweep.acquire.cli:main" in archive.read(entry)


def test_shipped_jobs_read_from_the_unpacked_wheel(wheel: Path, tmp_path: Path) -> None:
    home, elsewhere = tmp_path / "home", tmp_path / "elsewhere"
    elsewhere.mkdir()
    with zipfile.ZipFile(wheel) as archive:
        archive.extractall(home)
    env = {**os.environ, "PYTHONPATH": str(home), "PYTHONDONTWRITEBYTECODE": "1"}
    run = subprocess.run(
        [sys.executable, "-c", READ_ALL_JOBS],
        cwd=elsewhere,
        env=env,
        capture_output=True,
        text=True,
    )
    assert run.returncode == 0, run.stderr
    where, *jobs = run.stdout.split()
    assert Path(where).is_relative_to(home)
    shipped = tracked_files("configs/jobs")
    assert jobs == sorted(Path(name).stem for name in shipped)


def test_every_folder_with_code_is_a_listed_package() -> None:
    project = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))
    setup = project["tool"]["setuptools"]
    tracked = [n for n in tracked_files(*FOLDERS) if n.endswith(".py")]
    homes = {str(Path(name).parent) for name in tracked}
    wanted = {f"pitchsweep.{home.replace('/', '.')}": home for home in homes}
    assert sorted(setup["packages"]) == sorted(wanted)
    assert setup["package-dir"] == wanted
    assert all(f"{home}/__init__.py" in tracked for home in homes)


def test_type_checkers_see_every_folder() -> None:
    for folder in FOLDERS:
        link = ROOT / ".typing" / "pitchsweep" / folder
        assert link.resolve() == ROOT / folder
