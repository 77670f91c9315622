"""``shares completion``: scripts that their shells accept, and completion that really completes.

Each shell is asked itself where it is installed; bash always is where this package is used.
"""

from __future__ import annotations

import os
import shutil
import subprocess
from pathlib import Path

import pytest
from cli.harness import PROGRAM, run

from shares.cli.main import COMMANDS


def bash(script: str, folder: Path) -> subprocess.CompletedProcess[str]:
    environment = {**os.environ, "PATH": f"{PROGRAM.parent}:{os.environ['PATH']}"}
    return subprocess.run(
        ["bash", "--norc", "-c", script],
        cwd=folder,
        env=environment,
        stdin=subprocess.DEVNULL,
        capture_output=True,
        text=True,
        timeout=60,
        check=False,
    )


@pytest.mark.parametrize("shell", ["bash", "zsh", "fish"])
def test_a_script_for_each_shell(shell: str, tmp_path: Path) -> None:
    result = run("completion", shell)
    assert result.code == 0
    assert "_SHARES_COMPLETE" in result.out
    told = run("completion", shell, "--json").json
    assert (told["done"], told["shell"]) == (True, shell)
    assert told["script"].splitlines() == result.out.splitlines()
    if shutil.which(shell):
        script = tmp_path / "script"
        script.write_text(result.out)
        parsed = subprocess.run([shell, "-n", script], capture_output=True, check=False, timeout=60)
        assert (parsed.returncode, parsed.stderr) == (0, b"")


def completed(line: str, folder: Path) -> list[str]:
    """What bash offers after ``line``, asked the way bash asks."""
    words = line.split(" ")
    quoted = " ".join(f"'{word}'" for word in words)
    script = (
        f'eval "$(shares completion bash)"; COMP_WORDS=({quoted}); COMP_CWORD={len(words) - 1}; COMPREPLY=()\n'
        '"$(complete -p shares | sed "s/.*-F \\([^ ]*\\) .*/\\1/")" shares "${COMP_WORDS[COMP_CWORD]}" ""\n'
        'printf "%s\\n" "${COMPREPLY[@]}"'
    )
    done = bash(script, folder)
    assert (done.returncode, done.stderr) == (0, "")
    return done.stdout.split()


@pytest.mark.parametrize(
    ("line", "expected"),
    [
        ("shares ver", ["verify"]),
        ("shares s", ["split", "sheet", "show", "selftest"]),
        ("shares polynomial ", ["check", "list"]),
        ("shares recover --re", ["--reason", "--record"]),
        ("shares completion f", ["fish"]),
    ],
)
def test_bash_completes(line: str, expected: list[str], tmp_path: Path) -> None:
    assert sorted(completed(line, tmp_path)) == sorted(expected)


def test_bash_offers_every_command(tmp_path: Path) -> None:
    assert sorted(completed("shares ", tmp_path)) == sorted(COMMANDS)
