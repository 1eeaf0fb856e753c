"""The house as a whole: style, types, floors, start-up, and what lies at the top.

There is no outside source here; the rules are in pyproject.toml and DEVELOPERS.md.
"""

import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
import soundfile

TOP = Path(__file__).parent.parent
ALLOWED_AT_THE_TOP = {
    "README.md", "DEVELOPERS.md", "LICENSE", "pyproject.toml", "fluteprobe", "tests", "samples", "reports",
}  # fmt: skip
SLOW_TO_IMPORT = {"matplotlib", "librosa", "scipy", "numba", "sklearn", "pandas"}
NOT_FOR_HELP = SLOW_TO_IMPORT | {"numpy", "soundfile", "soxr"}


def run(*command: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run([sys.executable, *command], cwd=TOP, capture_output=True, text=True, check=False)


def modules_after(code: str) -> set[str]:
    """Return the top-level modules that a fresh Python has loaded after running some code."""
    told = run(
        "-c", f"{code}\nimport sys\nprint()\nprint(*{{name.partition('.')[0] for name in sys.modules}})"
    )
    assert told.returncode == 0, told.stderr
    return set(told.stdout.splitlines()[-1].split())


# Style and types ---------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    "command",
    [
        ("-m", "ruff", "check"),
        ("-m", "ruff", "format", "--check"),
        ("-m", "mypy"),
        ("-c", "from importlinter.cli import lint_imports_command as lint; lint()"),
    ],
    ids=["ruff check", "ruff format", "mypy", "import contracts"],
)
def test_the_tools_find_nothing(command: tuple[str, ...]) -> None:
    told = run(*command)
    assert told.returncode == 0, told.stdout + told.stderr


def test_nothing_else_lies_at_the_top() -> None:
    if not (TOP / ".git").exists():
        pytest.skip("not a git checkout")
    listed = subprocess.run(["git", "ls-files"], cwd=TOP, capture_output=True, text=True, check=True)
    top = {line.partition("/")[0] for line in listed.stdout.splitlines()}
    assert {name for name in top if not name.startswith(".")} <= ALLOWED_AT_THE_TOP


def test_every_module_opens_with_what_it_is_for() -> None:
    modules = [*TOP.glob("fluteprobe/**/*.py"), *TOP.glob("samples/**/*.py"), *TOP.glob("tests/**/*.py")]
    assert [str(path) for path in modules if not path.read_text("utf-8").startswith(('"""', 'r"""'))] == []


# Start-up ----------------------------------------------------------------------------------------------


def test_importing_the_package_loads_nothing_slow() -> None:
    assert modules_after("import fluteprobe") & NOT_FOR_HELP == set()


@pytest.mark.parametrize("words", [["--help"], ["--version"], ["hear", "--help"], ["chart", "--help"]])
def test_help_loads_nothing_slow(words: list[str]) -> None:
    call = f"main({words!r}, prog_name='fluteprobe', standalone_mode=False)"
    assert modules_after(f"from fluteprobe.cli.main import main\n{call}") & NOT_FOR_HELP == set()


def test_hearing_a_recording_loads_nothing_slow(tmp_path: Path) -> None:
    path = tmp_path / "take.wav"
    soundfile.write(path, 0.3 * np.sin(2 * np.pi * 440.0 * np.arange(48000) / 48000), 48000)
    assert modules_after(f"import fluteprobe\nfluteprobe.hear({str(path)!r})") & SLOW_TO_IMPORT == set()


def test_the_two_calls_of_a_notebook_are_there() -> None:
    import fluteprobe

    assert callable(fluteprobe.hear)
    assert callable(fluteprobe.measure)
    with pytest.raises(AttributeError, match=r"^module 'fluteprobe' has no attribute 'play'$"):
        fluteprobe.play  # noqa: B018  (asking is the test)
