"""What a task is about, found in what lies beside it, for whoever is to take part or only looks at it.

Source: FORMAT_KEYS.md, sec. 23; what each kind of content says is told by the module of that kind.
May import: shares.errors, shares.documents, .content, .description, .forms, .opening.
Secret: nothing. Confidential: what is signed or opened. Public: the rest.
Does not: ask anybody, or judge the task; its course does.
"""

from __future__ import annotations

from shares.documents.key_record import KeyRecord
from shares.documents.task import Joining, Opening, Task
from shares.errors import SharesError
from shares.keys.content import described
from shares.keys.description import Description, in_groups
from shares.keys.forms import signable
from shares.keys.opening import cautions_of


def about(
    task: Task,
    record: KeyRecord | None,
    content: bytes | None,
    *,
    issuer: bytes | None = None,
    earlier: bytes | None = None,
) -> Description | None:
    """Say what the content of a task is, and what to think of before it is signed or opened.

    Args:
        task: any.
        record: of the key that it names.
        content: what lies beside it, exactly as it names it.
        issuer, earlier: likewise, of what is to be signed: the certificate above, the revocation list before.

    Returns:
        The same as a signer is told; None where there is no content: none was asked for, or it is missing or another.
    """
    if isinstance(task.work, Joining) or record is None or content is None:
        return None
    if isinstance(task.work, Opening):
        head = (f"size: {len(content):,} bytes", f"SHA-256: {in_groups(task.work.content.digest)}")
        return Description("a message that is encrypted to the key", head, cautions_of(task.work))
    public_key = record.public_key.encode()
    try:
        return signable(task, content, issuer, earlier).described(public_key)
    except SharesError:
        # What it was to be checked by is not what it should be: the course says so, and this what the bytes are.
        return described(content, public_key)
