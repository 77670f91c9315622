"""The list of files that never reach the kernel holds, and its guard is seen to fire.

Source: this project's own rule (DEVELOPERS.md, "Test").
"""

from __future__ import annotations

import os
import re
import subprocess
import sys
import tomllib
from multiprocessing import get_context
from pathlib import Path

import pytest
from kernel_free import BUT, CHOICE, FREE, MARKER, REFUSED, TESTS, Guard, Watch

from shares.field.gf256 import Field

ROOT = TESTS.parent
WATCH = Watch()


def combined() -> None:
    out = bytearray(1)
    Field().combine([b"\x02"], [b"\x03"], [out])
    assert out == b"\x06"


def projected() -> None:
    out = bytearray(1)
    Field().project(b"\x02", b"\x03", out)
    assert out == b"\x06"


def forked() -> None:
    child = os.fork()
    if child == 0:
        try:
            combined()
        finally:
            os._exit(0)
    os.waitpid(child, 0)


def started() -> None:
    subprocess.run([sys.executable, "-c", "pass"], env={"A": "B"}, check=True)


def started_by_a_fork() -> None:
    child = os.fork()
    if child == 0:
        try:
            os.execve(sys.executable, [sys.executable, "-c", "pass"], {"A": "B"})  # noqa: S606
        finally:
            os._exit(1)
    assert os.waitpid(child, 0)[1] == 0


def started_by_the_system() -> None:
    assert os.waitpid(os.posix_spawn(sys.executable, [sys.executable, "-c", "pass"], {"A": "B"}), 0)[1] == 0


def started_by_multiprocessing() -> None:
    process = get_context("spawn").Process(target=os.getpid)
    process.start()
    process.join()


UNTOLD = f"was started without {CHOICE}={REFUSED!r}"
PYTHON = Path(sys.executable).name
REACHES = {
    combined: "the kernel was reached",
    projected: "the kernel was reached",
    forked: "the kernel was reached",
    started: f"{PYTHON} {UNTOLD}",
    started_by_a_fork: f"a program, by a forked process {UNTOLD}",
    started_by_the_system: f"{PYTHON} {UNTOLD}",
    started_by_multiprocessing: f"a process of multiprocessing {UNTOLD}",
}


def harmless() -> None:
    subprocess.run([sys.executable, "-c", "import shares.storage"], check=True)
    Field().multiply(2, 3)


@pytest.mark.parametrize("environment", [None, {**os.environ, "A": "B"}], ids=["inherited", "given"])
@pytest.mark.parametrize(
    "code", ["from shares.field.gf256 import Field; Field()", "import shares.cli.main as m; m.run()"]
)
def test_what_is_started_is_refused_a_kernel(code: str, environment: dict[str, str] | None) -> None:
    with WATCH.on() as found:
        given = None if environment is None else {**environment, CHOICE: os.environ[CHOICE]}
        command = [sys.executable, "-P", "-c", code, "--version"]
        done = subprocess.run(command, env=given, capture_output=True, text=True, check=False)
    assert done.returncode
    assert "the kernel must be native or portable" in done.stderr
    assert found == []


@pytest.mark.parametrize("before", ["portable", None])
def test_the_choice_of_a_kernel_is_afterwards_what_it_was(before: str | None, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.delenv(CHOICE, raising=False)
    if before:
        monkeypatch.setenv(CHOICE, before)
    with WATCH.on():
        assert os.environ[CHOICE] == REFUSED
    assert os.environ.get(CHOICE) == before


@pytest.mark.parametrize("what", REACHES, ids=lambda what: what.__name__)
def test_whatever_reaches_the_kernel_or_may_is_noticed(what) -> None:  # type: ignore[no-untyped-def]
    with WATCH.on() as found:
        what()
    assert found == [REACHES[what]]
    with WATCH.on() as found:
        harmless()
    assert found == []
    what()
    assert found == []


PLANTED = """
import pytest
from shares.field.gf256 import Field
def reach():
    Field().combine([bytes(1)], [bytes(1)], [bytearray(1)])
@pytest.fixture(scope="module")
def before():
    reach()
@pytest.fixture
def after():
    yield
    reach()
def test_setup(before): pass
def test_call(): reach()
def test_caught():
    with pytest.raises(BaseException):
        reach()
        raise KeyError
def test_teardown(after): pass
def test_nothing(): pass
"""


def test_a_test_of_the_list_that_reaches_the_kernel_fails(tmp_path: Path) -> None:
    guarded = (
        "from pathlib import Path\nfrom kernel_free import Guard\nHERE = Path(__file__).parent\n"
        "def pytest_configure(config):\n"
        "    config.pluginmanager.register(Guard({'in/', 'test_import.py'}, {'in/test_but.py'}, HERE))\n"
    )
    (tmp_path / "conftest.py").write_text(guarded)
    (tmp_path / "pytest.ini").write_text(f"[pytest]\nmarkers = {MARKER}\naddopts = --strict-markers\n")
    (tmp_path / "in").mkdir()
    (tmp_path / "in" / "test_listed.py").write_text(PLANTED)
    (tmp_path / "in" / "test_but.py").write_text(PLANTED)
    (tmp_path / "test_import.py").write_text(PLANTED + "reach()\n")
    python_path = os.pathsep.join([str(TESTS), os.environ.get("PYTHONPATH", "")])

    def run(*arguments: str) -> str:
        command = [sys.executable, "-P", "-m", "pytest", "-p", "no:cacheprovider", "-p", "no:xdist", "-rA", *arguments]
        done = subprocess.run(
            command, cwd=tmp_path, env=os.environ | {"PYTHONPATH": python_path},
            capture_output=True, text=True, check=False, timeout=60,
        )  # fmt: skip
        return done.stdout + done.stderr

    told = run("--continue-on-collection-errors")
    assert set(re.findall(r"^(FAILED|ERROR) in/test_listed.py::test_(\w+)", told, flags=re.MULTILINE)) == {
        ("ERROR", "setup"), ("FAILED", "call"), ("FAILED", "caught"), ("ERROR", "teardown"),
    }  # fmt: skip
    assert "the kernel was reached, but by tests/kernel_free.py in/test_listed.py never reaches the kernel" in told
    assert "ERROR test_import.py" in told
    assert told.count("PASSED in/test_but.py") == 5
    assert "PASSED in/test_listed.py::test_nothing" in told
    assert "the kernel was reached, but by tests/kernel_free.py test_import.py never" in told
    assert "5 passed, 5 deselected" in run("-m", f"not {MARKER}", "in")


def test_the_list_names_what_is_there_once_and_in_order() -> None:
    for names in (FREE, BUT):
        assert list(names) == sorted(set(names))
    assert [name for name in (*FREE, *BUT) if (TESTS / name).is_dir() != name.endswith("/")] == []
    assert [name for name in (*FREE, *BUT) if not (TESTS / name).exists()] == []
    # An exception is one of a folder that is listed, and a file that is listed is in none.
    folders = tuple(name for name in FREE if name.endswith("/"))
    assert [name for name in BUT if not name.startswith(folders)] == []
    assert [name for name in FREE if name.startswith(folders) and name not in folders] == []
    # What is about the kernel is never on it.
    assert [name for name in FREE if name.startswith(("ct/", "field/", "sharing/"))] == []


def test_tests_of_the_list_are_marked_and_no_others(request: pytest.FixtureRequest) -> None:
    (guard,) = (one for one in request.config.pluginmanager.get_plugins() if isinstance(one, Guard))
    for name in FREE:
        path = TESTS / (f"{name}test_of_tomorrow.py" if name.endswith("/") else name)
        assert guard.has(path), name
    assert [name for name in BUT if guard.has(TESTS / name)] == []
    assert not guard.has(Path(__file__))
    for item in request.session.items:
        assert (item.get_closest_marker(MARKER) is not None) == guard.has(item.path), item.nodeid


def test_the_second_run_leaves_out_what_the_first_does_and_the_list() -> None:
    project = tomllib.loads((ROOT / "pyproject.toml").read_text("utf-8"))
    (usual,) = re.findall(r"-m '([^']*)'", project["tool"]["pytest"]["ini_options"]["addopts"])
    script = (ROOT / "tests/run").read_text("utf-8")
    assert f'\nusual="{usual}"\n' in script
    assert f'suite portable -m "$usual and not {MARKER}"\n' in script
    assert "suite native\n" in script
