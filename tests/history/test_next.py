"""A party's next step: the same end whatever the order, and never two things said in one round.

Checked against: nothing outside; the rule that a message, once stored, is sent again to the byte is this project's own
(shares/documents/FORMAT_KEYS.md, sec. 25).
"""

from __future__ import annotations

import shutil
from pathlib import Path

from history.exchanging import NAMES, desks, exchange, to_the_end


def test_parties_come_to_the_same_end(tmp_path: Path) -> None:
    machines = desks(tmp_path)
    to_the_end(machines)
    ends = {(desk.mine / "sums.txt").read_bytes() for desk in machines.values()}
    assert len(ends) == 1
    for desk in machines.values():
        assert sorted(path.name for path in desk.own().folder.iterdir()) == ["done.json"]
