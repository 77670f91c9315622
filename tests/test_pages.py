"""The pages for people: what README shows is run, word for word, and its output compared."""

from __future__ import annotations

import doctest
import os
import re
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parent.parent
README = (ROOT / "README.md").read_text("utf-8")


def console_steps(page: str) -> list[tuple[str, str]]:
    """Return (command, expected output) for each line that starts with ``$`` in a console block."""
    steps = []
    for block in re.findall(r"```console\n(.*?)```", page, flags=re.DOTALL):
        for step in re.split(r"^\$ ", block, flags=re.MULTILINE)[1:]:
            command, _, expected = step.partition("\n")
            while command.endswith("\\"):
                more, _, expected = expected.partition("\n")
                command += f"\n{more}"
            steps.append((command, expected))
    return steps


def as_pattern(expected: str) -> str:
    """Turn expected output into a pattern in which ``...`` stands for any text."""
    return re.escape(expected).replace(re.escape("..."), ".*")


def mismatch(expected: str, output: str) -> bool:
    return re.fullmatch(as_pattern(expected.strip()), output.strip(), flags=re.DOTALL) is None


def test_the_comparison_can_fail() -> None:
    assert not mismatch("Split: a\n...\nend", "Split: a\nx\ny\nend\n")
    assert mismatch("Split: a", "Split: b")
    assert mismatch("", "something")


def test_readme_tour_runs_as_printed(tmp_path: Path) -> None:
    steps = console_steps(README)
    assert len(steps) >= 15
    (tmp_path / "bin").mkdir()
    for name in ("shares", "python3"):
        target = Path(sys.executable) if name == "python3" else Path(sys.executable).parent / "shares"
        (tmp_path / "bin" / name).symlink_to(target)
    # What the page has the reader type first: where the clone is, and that the command is found.
    environment = os.environ | {"PATH": f"{tmp_path / 'bin'}:{os.environ['PATH']}", "clone": str(ROOT)}
    wrong = []
    for command, expected in steps:
        done = subprocess.run(
            ["bash", "-c", f"exec 2>&1; {command}"],  # as a person sees it: both streams in one terminal
            cwd=tmp_path,
            env=environment,
            capture_output=True,
            text=True,
            check=False,
            timeout=60,
        )
        if mismatch(expected, done.stdout) or done.returncode:
            wrong.append(f"$ {command}\nexit {done.returncode}, expected:\n{expected}\ngot:\n{done.stdout}")
    assert not wrong, "\n".join(wrong)


def test_readme_library_example_holds() -> None:
    results = doctest.testfile(str(ROOT / "README.md"), module_relative=False)
    assert results.attempted >= 6
    assert results.failed == 0


@pytest.mark.parametrize("page", ["README.md", "DEVELOPERS.md", "SECURITY.md", "CHANGELOG.md"])
def test_links_between_pages_lead_somewhere(page: str) -> None:
    text = (ROOT / page).read_text("utf-8")
    for target in re.findall(r"\]\(([^)#:]+)\)", text):
        assert (ROOT / target).exists(), target
    # Commands and files that a page names in backquotes exist.
    for named in re.findall(r"`(?:\./)?((?:tests|examples|shares|\.ci)/[\w./-]+)`", text):
        assert (ROOT / named).exists(), named
