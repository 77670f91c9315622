"""``shares key sign``, ``root``, ``certify`` and ``revoke``: what becomes of a signature in each form.

Checked against: ``openssl`` and ``ssh-keygen``, which verify what a quorum has signed.
"""

from __future__ import annotations

import os
import re
import subprocess
from datetime import timedelta
from pathlib import Path

import pytest
from cli.asked import FIRST, SECOND, finish
from cli.harness import PROGRAM, assert_refused, files_in, run
from cli.keyed import OFFICE, Keyed
from cli.test_key import tool
from parties import unlocked

from shares import clock
from shares.keys.asking import ask, new_signing
from shares.keys.folder import KeyFolder
from shares.keys.forms import Signable
from shares.keys.revocation import Revoked, revocation_list


class TestForms:
    def test_the_commands_to_verify_by_can_be_pasted(self, keyed: Keyed) -> None:
        """As printed, but for the names in capitals; in a folder with a space, which is quoted."""
        spaced = keyed.copy(keyed.folder.parent / "harbour 2")
        for more, word, capitals in (
            ([], "Success", {"PEM": "p"}),
            (["--openssh", "tide'tables"], "Good", {"PUB": "q", "ALLOWED": "r"}),
        ):
            task = spaced.ask("sign", spaced.path("release.txt"), task=f"t{word}", more=more)
            spaced.answer(task, FIRST, SECOND)
            done = run(*finish(spaced, task, "--to", spaced.path(f"sig-{word}")))
            script = "\n".join(line for line in done.out.splitlines() if line.startswith("  "))
            for capital, name in capitals.items():
                script = re.sub(rf"\b{capital}\b", name, script)
            path = os.environ | {"PATH": f"{PROGRAM.parent}:{os.environ['PATH']}"}
            told = subprocess.run(
                ["sh", "-e"], input=script, cwd=spaced.folder, env=path, capture_output=True, text=True
            )
            assert (told.returncode, word in told.stdout) == (0, True), told.stderr

    def test_ssh_keygen_verifies(self, keyed: Keyed) -> None:
        release, ssh = keyed.path("release.txt"), keyed.path("k.pub")
        task = keyed.ask("sign", release, task="t", more=["--openssh", "file"])
        keyed.answer(task, FIRST, SECOND)
        signature = keyed.finish(task, "release.txt.sig")
        assert run("key", "show", keyed.key, "--openssh", ssh).code == 0
        keyed.path("allowed").write_text(f"harbour {ssh.read_text()}")
        verify = ["ssh-keygen", "-Y", "verify", "-f", keyed.path("allowed"), "-I", "harbour", "-n", "file"]
        assert "Good" in tool(*verify, "-s", signature, stdin=release.read_bytes())

    def test_an_authority_of_the_quorum_serves_openssl(self, keyed: Keyed) -> None:
        """Root, intermediate, a server below it is the intermediate's own affair; a server below the root; a list."""
        root = keyed.ask("root", "CN=Harbour Trust Root,O=Harbour Trust", task="t-root")
        keyed.answer(root, FIRST, SECOND)
        root_pem = keyed.finish(root, "root.pem")
        for name, more in (
            ("authority", ["-subj", "/CN=Harbour Intermediate"]),
            ("server", ["-subj", "/CN=tide.example", "-addext", "subjectAltName=DNS:tide.example"]),
        ):
            key, request = keyed.path(f"{name}.key"), keyed.path(f"{name}.req")
            tool("openssl", "req", "-newkey", "ed25519", "-nodes", "-keyout", key, "-out", request, *more)
            task = keyed.ask("certify", request, task=f"t-{name}", more=["--issuer", str(root_pem), "--for", name])
            keyed.answer(task, FIRST, SECOND)
            made = keyed.finish(task, f"{name}.pem")
            assert tool("openssl", "verify", "-CAfile", root_pem, made).endswith(": OK\n")
        more = ["--issuer", str(root_pem), "--reason", "keyCompromise"]
        revoke = keyed.ask("revoke", keyed.path("server.pem"), task="t-list", more=more)
        keyed.answer(revoke, FIRST, SECOND)
        listed = keyed.finish(revoke, "list.pem")
        check = ["openssl", "verify", "-crl_check", "-CRLfile", listed, "-CAfile", root_pem]
        assert tool(*check, keyed.path("authority.pem")).endswith(": OK\n")
        refused = subprocess.run([*check, keyed.path("server.pem")], capture_output=True, text=True, check=False)
        assert "certificate revoked" in refused.stderr
        # The next list continues it, and signing anew below another certificate is refused before anybody is asked.
        more = ["--issuer", str(root_pem), "--earlier", str(listed)]
        again = keyed.ask("revoke", keyed.path("authority.pem"), task="t-list-2", more=more)
        keyed.answer(again, FIRST, SECOND)
        assert "2" in tool("openssl", "crl", "-in", keyed.finish(again, "list-2.pem"), "-noout", "-crlnumber")
        arguments = [
            "key",
            "certify",
            keyed.key,
            keyed.path("server.req"),
            "--for",
            "server",
            "--task",
            keyed.path("n"),
        ]
        arguments += ["--issuer", keyed.path("authority.pem"), f"--signer={FIRST}", f"--signer={SECOND}"]
        assert_refused([*arguments, *keyed.as_(OFFICE)], 4, watched=keyed.folder)

    def test_a_list_that_forgets_is_refused_by_every_signer(self, keyed: Keyed) -> None:
        """An author whose own program looks away: the task is well signed, its list leaves out what was revoked."""
        root = keyed.ask("root", "CN=Harbour Trust Root", task="t-root")
        keyed.answer(root, FIRST, SECOND)
        root_pem = keyed.finish(root, "root.pem").read_bytes()
        public_key = keyed.record.public_key.encode()
        now = clock.now()

        def body(*serials: int, number: int) -> bytes:
            revoked = [Revoked(serial, now) for serial in serials]
            return revocation_list(
                public_key,
                revoked,
                issuer=root_pem,
                this_update=now,
                next_update=now + timedelta(days=9),
                number=number,
            )

        def asked(name: str, content: bytes, **beside: bytes) -> Path:
            with unlocked(OFFICE) as author:
                folder = KeyFolder(keyed.key)
                given = {"signers": (FIRST, SECOND), "author": author, "due": now + timedelta(days=7)}
                with pytest.MonkeyPatch.context() as patch:
                    patch.setattr(Signable, "message", lambda *_: b"")
                    task = new_signing(content, folder.record, form="revocation-list", **given, **beside)
                ask(folder, task, keyed.path(name), content, author, **beside)
            return keyed.path(name)

        first = asked("t-first", body(77, number=1), issuer=root_pem)
        keyed.answer(first, FIRST, SECOND)
        earlier = keyed.finish(first, "first.pem").read_bytes()
        task = asked("t-second", body(78, number=2), issuer=root_pem, earlier=earlier)
        before = files_in(task)
        done = keyed.next(task, FIRST)
        assert (done.code, files_in(task)) == (4, before)
        assert "leaves out 1 of what the earlier list revokes" in done.out
        # Without what it is checked by nothing is done with a task at all.
        (task / "earlier").unlink()
        assert_refused(["task", "show", task], 5, "does not exist", watched=keyed.folder)

    def test_the_author_is_told_what_the_signers_will_be(self, keyed: Keyed) -> None:
        signers = [f"--signer={name}" for name in (FIRST, SECOND)]
        subject = "CN=Harbour Trust Root,O=Harbour Trust"
        task = ["--task", keyed.path("t"), *signers, *keyed.as_(OFFICE)]
        done = run("key", "root", keyed.key, subject, "--valid", "2y", "--path-length", "1", *task)
        for words in (f"subject: {subject}", "730 days", "at most 1", "cannot be taken back"):
            assert words in done.out

    @pytest.mark.parametrize(
        ("verb", "more", "code"),
        [
            ("root", ["no distinguished name"], 2),
            ("root", ["CN=Root", "--valid", "9999y"], 2),
            ("root", ["CN=Root", "--path-length", "256"], 2),
            ("certify", ["release.txt", "--issuer", "release.txt", "--for", "server"], 4),
            ("certify", ["missing", "--issuer", "release.txt", "--for", "server"], 5),
            ("revoke", ["release.txt", "--issuer", "release.txt"], 4),
            ("revoke", ["--issuer", "missing"], 5),
        ],
    )
    def test_what_cannot_be_certified_is_not_asked_for(
        self, keyed: Keyed, verb: str, more: list[str], code: int, monkeypatch: pytest.MonkeyPatch
    ) -> None:
        monkeypatch.chdir(keyed.folder)
        arguments = ["key", verb, keyed.key, *more, "--task", "t", f"--signer={FIRST}", f"--signer={SECOND}"]
        assert_refused([*arguments, *keyed.as_(OFFICE)], code, watched=keyed.folder)

    def test_what_others_act_on_is_not_asked_for_as_plain_bytes(self, keyed: Keyed) -> None:
        body = keyed.path("body")
        arguments = ["key", "sign", keyed.key, body, "--task", keyed.path("t"), f"--signer={FIRST}"]
        arguments += [f"--signer={SECOND}", *keyed.as_(OFFICE)]
        for content in (b"\x30\x80" + bytes(40), b"shares/v1/sign/task{}", b"SSHSIG\0\0"):
            body.write_bytes(content)
            assert_refused(arguments, 2, "as plain bytes", "--openssh", watched=keyed.folder)
        assert run(*arguments, "--openssh=file").code == 0

    def test_a_path_length_is_for_authorities(self, keyed: Keyed) -> None:
        arguments = ["key", "certify", keyed.key, "r", "--for", "server", "--path-length", "1", "--issuer", "i"]
        arguments += ["--task", keyed.path("t"), f"--signer={FIRST}", f"--signer={SECOND}", *keyed.as_(OFFICE)]
        assert_refused(arguments, 2, "--path-length", watched=keyed.folder)
