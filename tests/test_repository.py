"""What is stated in two places agrees, and what is shipped is what is here.

Source: PEP 425 (tags of a wheel), PEP 440 and PEP 621 (versions and metadata), PEP 561 (py.typed), the limited API of
CPython ("C API Stability"); everything else is this project's own rule (DEVELOPERS.md).
"""

from __future__ import annotations

import importlib.metadata
import os
import re
import subprocess
import sys
import tarfile
import tomllib
from pathlib import Path

import hypothesis
import pytest

import shares
from shares.cli import main
from shares.planning.simulate import INSTALL

ROOT = Path(__file__).resolve().parent.parent
PROJECT = tomllib.loads((ROOT / "pyproject.toml").read_text("utf-8"))

TOP_LEVEL = {
    "README.md",
    "DEVELOPERS.md",
    "SECURITY.md",
    "CHANGELOG.md",
    "LICENSE",
    "pyproject.toml",
    "shares",
    "tests",
    "examples",
}
MOST_LINES = 400


def tracked() -> list[str]:
    """Return the files of the repository that exist, those not yet added included."""
    command = ["git", "ls-files", "-z", "--cached", "--others", "--exclude-standard"]
    names = subprocess.run(command, cwd=ROOT, capture_output=True, text=True, check=True).stdout.split("\0")
    found = [name for name in names if name and (ROOT / name).is_file()]
    assert "pyproject.toml" in found
    return found


def shipped() -> dict[str, Path]:
    """Return the files of the installed package, by their name below ``shares/``, without caches."""
    here = Path(shares.__file__).parent
    files = (path for path in here.rglob("*") if path.is_file() and path.suffix != ".pyc")
    return {path.relative_to(here).as_posix(): path for path in files}


def needs_wheel() -> None:
    """Skip where an editable install runs; fail where the tests were promised a wheel."""
    if "site-packages" not in Path(shares.__file__).parts:
        if os.environ.get("SHARES_REQUIRE_WHEEL"):
            pytest.fail(f"the package under test is {shares.__file__}, not an installed wheel")
        pytest.skip("no wheel is installed here; tests/run installs one")


def test_the_python_floor_is_the_same_everywhere() -> None:
    extension = PROJECT["tool"]["setuptools"]["ext-modules"][0]
    (limited,) = (int(value, 16) for name, value in extension["define-macros"] if name == "Py_LIMITED_API")
    major, minor = limited >> 24, limited >> 16 & 0xFF
    assert limited == major << 24 | minor << 16
    floor = f"{major}.{minor}"
    assert PROJECT["project"]["requires-python"] == f">={floor}"
    assert PROJECT["tool"]["distutils"]["bdist_wheel"]["py-limited-api"] == f"cp{major}{minor}"
    assert PROJECT["tool"]["ruff"]["target-version"] == f"py{major}{minor}"
    assert f"--python-version {floor} " in (ROOT / "tests/requirements.lock").read_text("utf-8")
    for script in ("tests/run", "examples/quickstart"):
        text = (ROOT / script).read_text("utf-8")
        assert set(re.findall(r"sys\.version_info < \((\d+, \d+)\)", text)) == {f"{major}, {minor}"}, script
        assert set(re.findall(r"\b3\.\d+(?= or later)", text)) == {floor}, script
    for page in ("README.md", "DEVELOPERS.md"):
        assert set(re.findall(r"Python (3\.\d+)", (ROOT / page).read_text("utf-8"))) <= {floor}, page


def test_versions_agree() -> None:
    newest = re.search(r"^## (\S+)", (ROOT / "CHANGELOG.md").read_text("utf-8"), flags=re.MULTILINE)
    assert newest is not None
    assert newest[1] == shares.__version__
    assert importlib.metadata.version("shares") == shares.__version__


def test_nobody_is_told_to_install_by_name_what_a_stranger_may_have_on_an_index() -> None:
    readme = (ROOT / "README.md").read_text("utf-8")
    ((name, floor),) = (bound.split(">=") for bound in PROJECT["project"]["optional-dependencies"]["plan"])
    assert f"{name} {floor} or later beside shares" in INSTALL
    assert f"{name} ({floor} or later)" in readme
    (heading,) = re.findall(r"'(.*)'", INSTALL)
    (part,) = re.findall(rf"^## {heading}\n(.*?)^## ", readme, flags=re.MULTILINE | re.DOTALL)
    assert re.findall(r"pip install (.*)", part) == [
        "'.[plan]'",
        "'./shares-VERSION-cp311-abi3-linux_x86_64.whl[plan]'",
    ]
    by_name = re.compile(r"pip3? install (-\S+ )*['\"]?shares\b(?!-)|\bshares\[plan\]")
    assert all(map(by_name.search, ("pip install -U shares", "pip install 'shares[plan]'", "the extra shares[plan]")))
    assert [
        name
        for name in tracked()
        if name.endswith((".py", ".md"))
        and name.startswith(("shares/", "README", "CHANGE"))
        and by_name.search((ROOT / name).read_text("utf-8"))
    ] == []


def test_top_level_holds_what_was_agreed_and_nothing_else() -> None:
    names = {name.split("/")[0] for name in tracked()}
    assert {name for name in names if not name.startswith(".")} == TOP_LEVEL


def rooms_of_the_house(page: str) -> dict[str, str]:
    """Return what DEVELOPERS.md says is in each room; the files below all rooms are in the room without a name."""
    (block,) = re.findall(r"^    cli/.*\n(?:    .*\n)+", page, flags=re.MULTILINE)
    told = re.split(r"^    (?=\S)", block, flags=re.MULTILINE)[1:]
    return dict(line.split("/", 1) if re.match(r"\w+/", line) else ("", line) for line in told)


def test_every_module_has_its_place_in_the_house() -> None:
    told = rooms_of_the_house((ROOT / "DEVELOPERS.md").read_text("utf-8"))
    # A command's own modules go by its name.
    by_command = {module for module, _ in main.COMMANDS.values()}
    modules = [Path(name) for name in tracked() if re.fullmatch(r"shares/(.*/)?(?!__)\w+\.py", name)]
    assert {path.parent.name for path in modules} - {"shares"} == told.keys() - {""}
    missing = [
        path.as_posix()
        for path in modules
        if not re.search(rf"\b{path.stem}\b", told["" if path.parent.name == "shares" else path.parent.name])
        and not (path.parent.name == "cli" and path.stem.split("_")[0] in by_command)
    ]
    assert missing == []
    assert len(modules) > 150


def test_no_file_of_the_package_is_too_long_to_read() -> None:
    # The schemas are written by a program, of modules that people can read.
    names = [name for name in tracked() if name.startswith("shares/") and "/schemas/" not in name]
    lengths = {name: (ROOT / name).read_bytes().count(b"\n") for name in names}
    assert {name: lines for name, lines in lengths.items() if lines > MOST_LINES} == {}
    assert len(lengths) > 30


def test_no_file_names_a_machine_or_a_package_host() -> None:
    # Joined here, so that this file does not hold what it looks for.
    words = [
        "/" + "work/",
        "/" + "root/",
        "/" + "home/",
        "/" + "Users/",
        "pypi" + r"\.",
        "python" + "hosted",
        "index" + "-url",
    ]
    pattern = re.compile("|".join(words))
    found = []
    for name in tracked():
        text = (ROOT / name).read_bytes().decode("utf-8", "replace")
        found += [f"{name}: {match[0]}" for match in pattern.finditer(text)]
    assert found == []
    assert all(pattern.search(word.replace("\\", "")) for word in words)


def test_what_runs_is_what_is_checked_out() -> None:
    needs_wheel()
    code = {name: path.read_bytes() for name, path in shipped().items() if not name.endswith(".so")}
    assert {name: text == (ROOT / "shares" / name).read_bytes() for name, text in code.items()} == dict.fromkeys(
        code, True
    )
    here = {path.relative_to(ROOT / "shares").as_posix() for path in (ROOT / "shares").rglob("*.py")}
    assert here - code.keys() == set()


def test_the_wheel_holds_what_a_user_needs_and_no_more() -> None:
    needs_wheel()
    names = shipped().keys()
    assert names >= {"py.typed", "documents/FORMAT.md", "field/_kernel.pyi", "field/_kernel.abi3.so"}
    schemas = {f"documents/schemas/{path.name}" for path in (ROOT / "shares/documents/schemas").glob("*.json")}
    assert schemas
    assert names >= schemas
    assert {Path(name).suffix for name in names} <= {".py", ".pyi", ".so", ".json", ".md", ".typed", ".html", ".css"}
    distribution = importlib.metadata.distribution("shares")
    (tag,) = re.findall(r"^Tag: (.*)$", distribution.read_text("WHEEL") or "", flags=re.MULTILINE)
    assert tag.startswith("cp311-abi3-linux_")
    assert {str(path).split("/")[0] for path in distribution.files or ()} <= {
        "shares", f"shares-{shares.__version__}.dist-info", "..",
    }  # fmt: skip
    assert any(str(path).endswith("licenses/LICENSE") for path in distribution.files or ())


def test_the_source_archive_holds_all_that_a_build_needs(tmp_path: Path) -> None:
    for name in tracked():
        if name.startswith("shares/") or "/" not in name:
            (tmp_path / name).parent.mkdir(parents=True, exist_ok=True)
            (tmp_path / name).write_bytes((ROOT / name).read_bytes())
    build = "import sys; from setuptools import build_meta; build_meta.build_sdist(sys.argv[1])"
    subprocess.run(
        [sys.executable, "-c", build, tmp_path / "made"], cwd=tmp_path, capture_output=True, check=True, timeout=60
    )
    (archive,) = (tmp_path / "made").glob("*.tar.gz")
    with tarfile.open(archive) as opened:
        names = {name.partition("/")[2] for name in opened.getnames()}
    wanted = {name for name in tracked() if name.startswith("shares/")}
    assert wanted - names == set()
    assert names >= {"LICENSE", "README.md", "pyproject.toml"}


def normal(requirement: str) -> str:
    """Return the name that a requirement is about (PEP 503)."""
    return re.sub(r"[-_.]+", "-", re.split(r"[^\w.-]", requirement, maxsplit=1)[0]).lower()


def test_the_lock_pins_with_hashes_all_that_is_needed() -> None:
    lock = (ROOT / "tests/requirements.lock").read_text("utf-8")
    entries = re.findall(
        r"^(\S+?)==(\S+)[^\n]*\\\n((?:    --hash=sha256:[0-9a-f]{64}[ \\]*\n)+)", lock, flags=re.MULTILINE
    )
    assert len(entries) == len(re.findall(r"^[^\s#]", lock, flags=re.MULTILINE))
    lines = (ROOT / "tests/requirements.in").read_text("utf-8").splitlines()
    wanted = [*PROJECT["project"]["dependencies"], *(line for line in lines if line and not line.startswith("#"))]
    assert {normal(line) for line in wanted} <= {normal(name) for name, _, _ in entries}


def test_the_tests_run_on_the_pinned_versions() -> None:
    if not os.environ.get("SHARES_REQUIRE_WHEEL"):
        pytest.skip("tests/run installs the pinned versions")
    lock = (ROOT / "tests/requirements.lock").read_text("utf-8")
    pinned: dict[str, set[str]] = {}
    for name, version in re.findall(r"^(\S+?)==(\S+)", lock, flags=re.MULTILINE):
        pinned.setdefault(normal(name), set()).add(version)  # one version for each Python, at times
    installed = {normal(found.name): found.version for found in importlib.metadata.distributions()}
    assert {name: version for name, version in installed.items() if version not in pinned.get(name, {version})} == {}
    assert {normal(line) for line in PROJECT["project"]["dependencies"]} <= installed.keys() & pinned.keys()


def test_ci_runs_the_test_command_of_the_readme_as_it_stands() -> None:
    lines = (ROOT / ".ci/run").read_text("utf-8").splitlines()
    assert lines[-1] == "exec ./tests/run"
    assert "./tests/run" in (ROOT / "README.md").read_text("utf-8")
    for script in (".ci/run", "tests/run", "examples/quickstart"):
        assert os.access(ROOT / script, os.X_OK), script


def test_ci_repeats_the_same_examples() -> None:
    ci = hypothesis.settings.get_profile("shares-ci")
    assert (ci.max_examples, ci.derandomize, ci.database, ci.print_blob) == (300, True, None, True)
    nightly = hypothesis.settings.get_profile("nightly")
    assert (nightly.max_examples, nightly.derandomize) == (5000, False)


@pytest.mark.parametrize(
    ("arguments", "environment", "complaint"),
    [
        (["--showlocals"], {}, "--showlocals prints secrets"),
        ([], {"SHARES_KERNEL": "abacus"}, "the kernel must be native or portable"),
    ],
)
def test_pytest_refuses_to_start(arguments: list[str], environment: dict[str, str], complaint: str) -> None:
    command = [sys.executable, "-P", "-m", "pytest", "--collect-only", "tests/test_clock.py", *arguments]
    done = subprocess.run(
        command, cwd=ROOT, env=os.environ | environment, capture_output=True, text=True, check=False, timeout=60
    )
    assert done.returncode == pytest.ExitCode.USAGE_ERROR
    assert complaint in done.stderr
