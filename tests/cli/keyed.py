"""A folder in which a threshold key is at work: the parties' files, the office's key folder, and each custodian's own.

What is at work here in one folder would in earnest be as many machines: two look at nothing but a task's folder.
"""

from __future__ import annotations

import shutil
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from cli.harness import NAMES, Result, run
from cryptography import x509
from cryptography.hazmat.primitives import hpke
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey
from cryptography.hazmat.primitives.asymmetric.x25519 import X25519PublicKey
from cryptography.hazmat.primitives.serialization import Encoding
from parties import party

from shares.custody.parties import write_party
from shares.documents.key_record import KeyRecord
from shares.group.montgomery import public_of

OFFICE, AUDITOR = "harbour-office", "auditor-east"
LABEL = "Harbour release key"


@dataclass(frozen=True)
class Keyed:
    """The folder."""

    folder: Path
    names: tuple[str, ...] = NAMES[:3]
    need: int = 2
    delivered: str = "made"

    @classmethod
    def make(cls, folder: Path, names: Sequence[str] = NAMES[:3], need: int = 2) -> Keyed:
        """The parties' files, and no key yet."""
        folder.mkdir()
        for name in (*NAMES, OFFICE, AUDITOR):
            write_party(party(name), folder)
            (folder / f"{name}.passphrase").write_text(f"the passphrase of {name}\n")
        (folder / "made").mkdir()
        (folder / "release.txt").write_text("release 7 of the tide tables\n")
        return cls(folder, tuple(names), need)

    def copy(self, folder: Path) -> Keyed:
        """The same elsewhere. Nonces that were made before would be refused there."""
        shutil.copytree(self.folder, folder)
        return Keyed(folder, self.names, self.need)

    @property
    def key(self) -> Path:
        return self.folder / "release-key"

    @property
    def record(self) -> KeyRecord:
        return KeyRecord.parse((self.key / "record.json").read_bytes())

    def own(self, name: str) -> Path:
        """A custodian's folder."""
        return self.folder / self.delivered / name

    def path(self, name: str) -> Path:
        return self.folder / name

    def as_(self, name: str, option: str = "--sign") -> list[str]:
        """The options by which a party does something."""
        return [f"{option}={self.folder / f'{name}.key.json'}", self.phrase(name)]

    def phrase(self, name: str) -> str:
        return f"--passphrase-file={name}={self.folder / f'{name}.passphrase'}"

    def deal_arguments(self, **changes: object) -> list[str]:
        """The arguments of a dealing that would succeed, with some changed; None leaves one out."""
        given: dict[str, object] = {
            "need": self.need,
            "label": LABEL,
            "key-folder": self.key,
            "deliver": self.folder / self.delivered,
            **changes,
        }
        cards = [f"--custodian={self.folder / f'{name}.card.json'}" for name in self.names]
        options = [f"--{name}={value}" for name, value in given.items() if value is not None]
        return ["key", "deal", *cards, *options, *self.as_(OFFICE)]

    def dealt(self) -> Keyed:
        """This, with a key dealt; it must succeed."""
        done = run(*self.deal_arguments())
        assert done.code == 0, done.err
        return self

    def next(self, task: Path, name: str, *more: str) -> Result:
        """One step of a custodian in a task."""
        own = ["--mine", self.own(name), *self.as_(name, "--key")]
        return run("task", "next", task, *own, "--yes", *more)

    def answer(self, task: Path, *names: str, rounds: int = 3) -> None:
        """Let these custodians speak until nothing is left to be said."""
        for _ in range(rounds):
            for name in names:
                done = self.next(task, name)
                assert done.code == 0, done.err

    def ask(
        self, verb: str, *arguments: str | Path, task: str, names: Sequence[str] = (), more: Sequence[str] = ()
    ) -> Path:
        """Ask for a task as the office; it must succeed."""
        option = "--custodian" if verb == "open" else "--signer"
        chosen = [f"{option}={name}" for name in names or self.names[: self.need]]
        done = run("key", verb, self.key, *arguments, "--task", self.path(task), *chosen, *more, *self.as_(OFFICE))
        assert done.code == 0, done.err
        return self.path(task)

    def finish(self, task: Path, target: str) -> Path:
        """Put together what came of a task; it must succeed."""
        done = run("key", "finish", self.key, task, "--to", self.path(target), *self.as_(OFFICE))
        assert done.code == 0, done.err
        return self.path(target)


def key_before(page: str, folder: Path) -> None:
    """Do what an example of ``shares key`` or ``shares task`` takes to be done, in a folder with the parties' files."""
    if page in ("deal", "join"):
        return
    keyed = Keyed(folder, delivered=".").dealt()
    keyed.path("release.txt").write_text("release 7 of the tide tables\n")
    first, second = keyed.names[:2]
    if page in ("certify", "revoke"):
        root = keyed.ask("root", "CN=Harbour Trust Root", task="root-task")
        keyed.answer(root, first, second)
        keyed.finish(root, "root.pem")
        request(keyed.path("request.pem"))
    if page == "revoke":
        more = ["--issuer", str(keyed.path("root.pem")), "--for", "server"]
        task = keyed.ask("certify", keyed.path("request.pem"), task="server-task", more=more)
        keyed.answer(task, first, second)
        keyed.finish(task, "server.pem")
    if page == "open":
        u = X25519PublicKey.from_public_bytes(public_of(keyed.record.public_key))
        suite = hpke.Suite(hpke.KEM.X25519, hpke.KDF.HKDF_SHA256, hpke.AEAD.AES_256_GCM)
        keyed.path("message.bin").write_bytes(suite.encrypt(b"the berth plan", u))
    if page == "task":
        keyed.ask("sign", keyed.path("release.txt"), task="sign-release")
    if page == "finish":
        keyed.answer(keyed.ask("sign", keyed.path("release.txt"), task="to-sign"), first, second)


def request(path: Path) -> None:
    """Write a request for a server's certificate, in PEM."""
    key = Ed25519PrivateKey.generate()
    names = x509.SubjectAlternativeName([x509.DNSName("tide.example")])
    subject = x509.Name([x509.NameAttribute(x509.NameOID.COMMON_NAME, "tide.example")])
    made = x509.CertificateSigningRequestBuilder().subject_name(subject).add_extension(names, critical=False)
    path.write_bytes(made.sign(key, None).public_bytes(Encoding.PEM))
