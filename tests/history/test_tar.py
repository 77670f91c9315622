"""The one form of tar archive: other programs read it, and this one reads nothing else.

Source: IEEE Std 1003.1-2017 (POSIX), pax, "ustar Interchange Format"; the standard library's tarfile and the system's
tar as independent readers and writers of the format.
"""

from __future__ import annotations

import bz2
import gzip
import io
import lzma
import os
import shutil
import subprocess
import tarfile
from pathlib import Path

import pytest
from hypothesis import example, given
from hypothesis import strategies as st

from shares.errors import DocumentError, StorageError
from shares.history import tar
from shares.history.files import is_name_in_set
from shares.history.tar import END, MAX_NAME, content, header, index, padding
from shares.streams import Reader, regular_file

PARTS = st.text(
    st.characters(exclude_characters="/\\", exclude_categories=["Cs", "Cc"]), min_size=1, max_size=120
).filter(lambda part: not part.startswith("."))
NAMES = st.lists(PARTS, min_size=1, max_size=4).map("/".join).filter(lambda name: len(name.encode()) <= MAX_NAME)
LONG = "acknowledgements/" + "\u6e2f" * 64 + ".json"


def archive(files: dict[str, bytes]) -> bytes:
    return b"".join(header(name, len(data)) + data + padding(len(data)) for name, data in sorted(files.items())) + END


def put(folder: Path, data: bytes) -> Path:
    path = folder / "pack.tar"
    path.write_bytes(data)
    return path


def read(path: Path, limit: int = 1 << 24) -> dict[str, bytes]:
    with regular_file(path) as reader:
        found = index(reader, limit_of=lambda name: limit)
        return {name: content(reader, name, member) for name, member in found.items()}


def refused(folder: Path, data: bytes, **options: int) -> str:
    with pytest.raises(DocumentError) as caught:
        read(put(folder, data), **options)
    assert caught.value.where == str(folder / "pack.tar")
    assert str(caught.value).isprintable()
    return caught.value.what


@given(st.dictionaries(NAMES, st.binary(max_size=1500), min_size=1, max_size=5))
@example({"a" * 100: b"", "b" * 101: b"x" * 512, "c/" + "d" * 100: b"y", LONG: b"z" * 513})
@example({"p" * 155 + "/" + "n" * 100: b"", "p" * 156 + "/" + "n" * 100: b"1", "q" * 250 + "/" + "n" * 249: b"2"})
def test_it_is_read_back_by_this_program_and_by_another(tmp_path_factory, files):
    data = archive(files)
    path = put(tmp_path_factory.mktemp("tar"), data)
    assert read(path) == files
    assert list(read(path)) == sorted(files)
    with tarfile.open(fileobj=io.BytesIO(data), mode="r:", encoding="utf-8") as opened:
        members = opened.getmembers()
        assert {one.name: opened.extractfile(one).read() for one in members} == files  # type: ignore[union-attr]
    said = {(one.type, one.mode, one.uid, one.gid, one.uname, one.gname, one.mtime, one.linkname) for one in members}
    assert said == {(tarfile.REGTYPE, 0o644, 0, 0, "", "", 0, "")}


def test_the_system_unpacks_it(tmp_path):
    files = {"record.json": b"{}", "drills/3/report.json": b"x" * 600, LONG: b"scan", "e" * 101: b""}
    program = shutil.which("tar")
    assert program, "tar is not installed"
    subprocess.run(
        [program, "--extract", "--file", put(tmp_path, archive(files)), "--directory", tmp_path], check=True, timeout=60
    )
    assert {name: (tmp_path / name).read_bytes() for name in files} == files


def test_a_header_is_as_posix_says():
    # Offsets, widths and values by the table of "ustar Interchange Format"; the checksum by its definition.
    block = header("drills/3/report.json", 700)
    assert len(block) == 512
    fields = {
        "name": (0, 100),
        "mode": (100, 8),
        "uid": (108, 8),
        "gid": (116, 8),
        "size": (124, 12),
        "mtime": (136, 12),
    }
    fields |= {"chksum": (148, 8), "typeflag": (156, 1), "linkname": (157, 100), "magic": (257, 6), "version": (263, 2)}
    fields |= {"uname": (265, 32), "gname": (297, 32), "devmajor": (329, 8), "devminor": (337, 8), "prefix": (345, 155)}
    found = {name: block[at : at + width].rstrip(b"\0") for name, (at, width) in fields.items()}
    checksum = sum(block[:148]) + 8 * 32 + sum(block[156:])
    assert found == {
        "name": b"drills/3/report.json", "mode": b"0000644", "uid": b"0000000", "gid": b"0000000",
        "size": b"%011o" % 700, "mtime": b"00000000000", "chksum": b"%06o\0 " % checksum, "typeflag": b"0",
        "linkname": b"", "magic": b"ustar", "version": b"00", "uname": b"", "gname": b"", "devmajor": b"0000000",
        "devminor": b"0000000", "prefix": b"",
    }  # fmt: skip


def test_whatever_is_read_has_one_archive(tmp_path):
    files = {"a": b"x" * 511, "b/" + "c" * 101: b"y"}
    data = archive(files)
    read_all_the_same = 0
    with open(put(tmp_path, data), "r+b", buffering=0) as file:
        for at in range(len(data)):
            for byte in {data[at] ^ 1, data[at] ^ 0x80, 0, ord(" "), ord("0")} - {data[at]}:
                os.pwrite(file.fileno(), bytes([byte]), at)
                try:
                    found = index(Reader(file.fileno(), "pack"), limit_of=lambda name: 600)
                except DocumentError:
                    continue
                again = {name: content(Reader(file.fileno(), "pack"), name, member) for name, member in found.items()}
                assert archive(again) == data[:at] + bytes([byte]) + data[at + 1 :]
                read_all_the_same += 1
            os.pwrite(file.fileno(), data[at : at + 1], at)
    # Bytes of the two files, and of the long name that no checksum guards: the journal names what must be there.
    assert 512 * 3 < read_all_the_same < (512 + 3) * 5


def test_every_shorter_and_longer_one_is_refused(tmp_path):
    data = archive({"a": b"x", LONG: b"y" * 513})
    with open(put(tmp_path, data), "r+b", buffering=0) as file:
        for length in reversed(range(len(data))):
            os.ftruncate(file.fileno(), length)
            with pytest.raises(DocumentError):
                index(Reader(file.fileno(), "pack"), limit_of=lambda name: 600)
    assert "belong to no file" in refused(tmp_path, data + bytes(1))
    assert "belong to no file" in refused(tmp_path, data + bytes(512))
    assert "cut short within 'a'" in refused(tmp_path, header("a", 513) + b"x" * 512)
    assert "cut short at its end" in refused(tmp_path, data[:-512])
    assert "cut short at its end" in refused(tmp_path, data[:-1024])


def other(kind: bytes, name: str = "record.json", form: int = tarfile.USTAR_FORMAT, **members: object) -> bytes:
    """An archive that another program writes, with one file of some kind."""
    made = tarfile.TarInfo(name)
    made.type, made.mode = kind, 0o644
    for member, value in members.items():
        setattr(made, member, value)
    held = io.BytesIO()
    with tarfile.open(fileobj=held, mode="w:", format=form, encoding="utf-8") as opened:
        opened.addfile(made, io.BytesIO(bytes(made.size)))
    return held.getvalue()


@pytest.mark.parametrize(
    ("kind", "words"),
    [
        (tarfile.LNKTYPE, "is a hard link"),
        (tarfile.SYMTYPE, "is a symbolic link"),
        (tarfile.CHRTYPE, "is a character device"),
        (tarfile.BLKTYPE, "is a block device"),
        (tarfile.DIRTYPE, "is a folder of its own"),
        (tarfile.FIFOTYPE, "is a pipe"),
        (tarfile.CONTTYPE, "is a contiguous file"),
        (tarfile.GNUTYPE_SPARSE, "is a sparse file"),
        (tarfile.GNUTYPE_LONGNAME, "is an extended header"),
        (tarfile.GNUTYPE_LONGLINK, "is an extended header"),
        (tarfile.XGLTYPE, "is an extended header for the whole archive"),
        (tarfile.XHDTYPE, "is an extended header that tells more than a long name"),
        (b"Z", "of a kind that POSIX does not have"),
        (b"\0", "of a kind that POSIX does not have"),
    ],
)
def test_what_is_no_file_is_refused_by_name(tmp_path, kind, words):
    assert words in (said := refused(tmp_path, other(kind, linkname="policy.toml"))), said
    assert "record.json" in said


def test_a_link_out_of_the_folder_is_refused(tmp_path):
    assert "symbolic link" in refused(tmp_path, other(tarfile.SYMTYPE, "drills/out", linkname="/etc/hostname"))


@pytest.mark.parametrize(
    "name", ["/etc/hostname", "../up", "drills/../../up", "a//b", "./record.json", ".hidden", "a\\b", ""]
)
def test_names_that_lead_out_are_refused(tmp_path, name):
    assert not is_name_in_set(name)
    said = refused(tmp_path, header(name, 1) + b"x" + padding(1) + END)
    assert "lead out of the set's folder" in said
    assert repr(name)[1:-1] in said or name == "a\\b"


def test_a_name_that_could_steer_a_terminal_is_told_harmlessly(tmp_path):
    said = refused(tmp_path, header("a\x1b]0;b\x07/../c", 0) + END)
    assert "\\x1b" in said
    long = "d/" * 200 + "e"
    assert len(refused(tmp_path, header(long, 1 << 30) + END)) < 200


def test_forms_of_other_programs_are_refused(tmp_path):
    gnu = other(tarfile.REGTYPE, form=tarfile.GNU_FORMAT)
    assert "another form of archive" in refused(tmp_path, gnu)
    pax = other(tarfile.REGTYPE, form=tarfile.PAX_FORMAT, pax_headers={"comment": "hello"})
    assert "tells more than a long name" in refused(tmp_path, pax)
    sized = other(tarfile.REGTYPE, "n" * 101, form=tarfile.PAX_FORMAT, pax_headers={"size": "9" * 20})
    assert "tells more than a long name" in refused(tmp_path, sized)
    assert "another form of archive" in refused(tmp_path, b"no archive " * 100)
    assert "shorter than one header" in refused(tmp_path, b"no archive")
    assert "shorter than one header" in refused(tmp_path, b"")
    assert "holds no file" in refused(tmp_path, END)
    # The same file in the same form, with one thing that this program does not write.
    for member, value in {"mode": 0o4755, "uid": 1, "gid": 1, "uname": "registrar", "mtime": 1}.items():
        assert "not as `shares audit pack` writes it" in refused(tmp_path, other(tarfile.REGTYPE, **{member: value}))


def test_a_size_in_another_notation_is_refused(tmp_path):
    # GNU tar and star write sizes from 8 GiB on in base 256, marked by the highest bit.
    block = bytearray(header("a", 0))
    block[124:136] = b"\x80" + (1 << 60).to_bytes(11, "big")
    block[148:156] = b"%06o\0 " % (sum(block[:148]) + 8 * 32 + sum(block[156:]))
    assert "not as" in refused(tmp_path, bytes(block) + END)


def test_compressed_ones_are_refused(tmp_path):
    data = archive({"a": b"x"})
    for packed, form in ((gzip.compress(data), "gzip"), (bz2.compress(data), "bzip2"), (lzma.compress(data), "xz")):
        assert f"compressed ({form})" in refused(tmp_path, packed)
    assert "compressed (zip)" in refused(tmp_path, b"PK\x03\x04" + bytes(600))
    assert "compressed (zstd)" in refused(tmp_path, b"\x28\xb5\x2f\xfd" + bytes(600))


def test_names_stand_once_and_in_order(tmp_path):
    one = header("a", 1) + b"x" + padding(1)
    two = header("b", 1) + b"x" + padding(1)
    assert "'a' stands twice" in refused(tmp_path, one + one + END)
    assert "'a' stands twice" in refused(tmp_path, one + two + one + END)
    assert "'a' stands after one" in refused(tmp_path, two + one + END)


def test_sizes_and_numbers_are_bounded(tmp_path, monkeypatch):
    assert read(put(tmp_path, archive({"a": bytes(8)})), limit=8) == {"a": bytes(8)}
    assert "larger than 8 bytes" in refused(tmp_path, archive({"a": bytes(9)}), limit=8)
    # A claim alone: nothing of it is there, and nothing is set aside for it.
    assert "larger than" in refused(tmp_path, header("a", 8**11 - 1) + END)
    assert "cut short within 'a'" in refused(tmp_path, header("a", 1 << 24) + END)
    monkeypatch.setattr(tar, "MAX_MEMBERS", 3)
    assert len(read(put(tmp_path, archive({str(i): b"" for i in range(3)})))) == 3
    assert "more than 3 files" in refused(tmp_path, archive({str(i): b"" for i in range(4)}))


def test_a_name_that_fits_is_not_written_the_long_way(tmp_path):
    long = header("n" * 101, 0)
    short = header("n" * 100, 0)
    record = b"%d path=%s\n" % (100 + 10, b"n" * 100)
    disguised = long[:512].replace(b"%011o" % 111, b"%011o" % 110) + record.ljust(512, b"\0") + short
    assert "not as" in refused(tmp_path, disguised + END)


def test_a_bomb_within_a_pack_stays_a_file(tmp_path):
    inner = archive({str(i): bytes(1000) for i in range(50)})
    assert read(put(tmp_path, archive({"documents/inner.tar": inner}))) == {"documents/inner.tar": inner}


def test_what_changed_since_is_noticed(tmp_path):
    path = put(tmp_path, archive({"a": b"x" * 10, "b": b"y"}))
    with regular_file(path) as reader:
        found = index(reader, limit_of=lambda name: 100)
    put(tmp_path, archive({"a": b"x" * 600, "b": b"y"}))
    with regular_file(path) as reader, pytest.raises(StorageError, match="changed while it was read"):
        content(reader, "b", found["b"])
    put(tmp_path, archive({"a": b"x" * 10})[:517])
    with regular_file(path) as reader, pytest.raises(StorageError, match="changed while it was read"):
        content(reader, "a", found["a"])
