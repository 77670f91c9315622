"""The text form of time: against RFC 3339, against the system's date program, and as a bijection."""

from __future__ import annotations

import subprocess
from datetime import UTC, datetime, timedelta, timezone

import pytest
from hypothesis import given
from hypothesis import strategies as st

from shares.clock import from_text, now, to_text
from shares.errors import ParameterError

moments = st.datetimes(timezones=st.just(UTC)).map(lambda moment: moment.replace(microsecond=0))


def test_now_is_utc_to_the_second() -> None:
    before = datetime.now(UTC).replace(microsecond=0)
    moment = now()
    assert moment.tzinfo is UTC
    assert moment.microsecond == 0
    assert before <= moment <= datetime.now(UTC)


@given(moments)
def test_every_time_survives_its_text(moment: datetime) -> None:
    assert from_text(to_text(moment)) == moment


@given(
    st.from_regex(r"[0-9]{4}-[0-9]{2}-[0-9]{2}T[0-9]{2}:[0-9]{2}:[0-9]{2}Z", fullmatch=True)
    | st.builds(
        lambda moment, at, character: to_text(moment)[:at] + character + to_text(moment)[at + 1 :],
        moments,
        st.integers(0, 20),
        st.characters() | st.sampled_from("0123456789TZtz:-+. "),
    )
)
def test_a_time_has_one_text(text: str) -> None:
    try:
        moment = from_text(text)
    except ParameterError:
        return
    assert to_text(moment) == text


@pytest.mark.parametrize("seconds", [0, 951_782_399, 951_782_400, 1_000_000_000, 4_107_542_400])
def test_the_system_writes_the_same(seconds: int) -> None:
    # Source: date(1) of GNU coreutils, run here; 951782400 is the leap day of 2000, 4107542400 lies past that of 2100.
    command = ["date", "--utc", f"--date=@{seconds}", "+%Y-%m-%dT%H:%M:%SZ"]
    written = subprocess.run(command, capture_output=True, text=True, check=True).stdout.strip()
    assert to_text(datetime.fromtimestamp(seconds, UTC)) == written
    assert from_text(written).timestamp() == seconds


@pytest.mark.parametrize(
    "text",
    [
        # Source: RFC 3339, section 5.8, examples of its wider form; each has one narrower spelling or none here.
        "1985-04-12T23:20:50.52Z",
        "1996-12-19T16:39:57-08:00",
        "1990-12-31T23:59:60Z",
        "1990-12-31T15:59:60-08:00",
        "1937-01-01T12:00:27.87+00:20",
        # Variants that RFC 3339, section 5.6 permits in a note, or that other standards have.
        "2026-12-01t07:00:00z",
        "2026-12-01 07:00:00Z",
        "2026-12-01T07:00:00+00:00",
        "2026-12-01T07:00Z",
        "20261201T070000Z",
        "2026-W49-2T07:00:00Z",
        # Dates and times that do not exist.
        "2026-02-29T07:00:00Z",
        "2100-02-29T07:00:00Z",
        "0000-01-01T00:00:00Z",
        "2026-13-01T07:00:00Z",
        "2026-12-01T24:00:00Z",
        "2026-12-01T07:60:00Z",
        # Text around it, and digits that are none of ASCII's.
        "",
        " 2026-12-01T07:00:00Z",
        "2026-12-01T07:00:00Z\n",
        "2026-12-01T07:00:0\u0660Z",
    ],
)
def test_any_other_text_is_refused(text: str) -> None:
    with pytest.raises(ParameterError):
        from_text(text)


@pytest.mark.parametrize(
    "moment",
    [
        datetime(2026, 12, 1, 7, 0),
        datetime(2026, 12, 1, 7, 0, tzinfo=timezone(timedelta(hours=1))),
        datetime(2026, 12, 1, 7, 0, 0, 1, tzinfo=UTC),
    ],
)
def test_any_other_time_is_refused(moment: datetime) -> None:
    with pytest.raises(ParameterError):
        to_text(moment)
