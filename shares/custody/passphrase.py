"""Passphrases: drawing strong ones, and saying when a chosen one looks weak.

Source: the words are this project's own list of 256, so that each carries 8 bits; no two begin with the same three
letters. What a passphrase is worth against guessing: NIST SP 800-63B, sec. 5.1.1 (length before composition).
May import: shares.errors, shares.memory.
Secret: every passphrase. Public: the list, and how many words are drawn.
Does not: ask for passphrases, store them, or stretch them; ``documents.wrapping`` stretches.
"""

from __future__ import annotations

import secrets
from typing import Final

from shares.errors import ParameterError
from shares.memory import Secret

_TEXT: Final = """
    acorn adobe alder amber anchor apple apron arrow aspen atlas autumn avenue badge baker bamboo banjo barrel
    basket beacon bench berry bicycle birch bishop blanket blossom border bottle branch bread bridge brush bucket
    bugle butter cabin cactus camel candle carpet castle cedar cellar chalk cherry circle clover cobble comet copper
    coral cotton crane cricket crystal curtain daisy dancer delta denim desert diamond dinner dolphin donkey dragon
    drum dune eagle easel echo elbow ember engine envelope estuary fabric falcon feather fennel ferry fiddle field
    finger fjord flannel flute forest fossil fountain fox freight frost funnel gable galaxy garden gazelle ginger
    glacier globe goblet gondola granite guitar hammer harbour hazel helmet heron hickory hollow honey horizon hotel
    hurdle iceberg igloo indigo inkwell iris island ivory jacket jasmine jelly jersey jigsaw juniper kayak kernel
    kettle kitchen knapsack ladder lagoon lantern laurel lemon lentil lighthouse lilac linen lizard lobster locket
    lotus lumber magnet mango maple marble meadow melon mirror mitten monsoon mosaic mountain muffin mustard myrtle
    napkin nectar needle nickel noodle nutmeg oasis oboe ocean olive onion opal orchard otter oven oyster paddle
    palace panther parcel pebble pelican pencil pepper piano pigeon pillow planet plum pocket pollen pony prairie
    puddle pumpkin quarry quill rabbit radish raft raven ribbon ripple river robin rocket rudder saddle saffron
    salmon sandal sapphire satchel seagull sequoia shovel silver sketch sparrow spindle stable sunset tablet talon
    teapot temple thimble thunder ticket timber tomato tractor trumpet tulip tundra turnip umbrella valley vanilla
    velvet violin voyage waffle wagon walnut whistle willow window yacht yarrow yogurt zebra zenith zipper
"""
WORDS: Final = tuple(_TEXT.split())

DEFAULT_WORDS: Final = 10
"""80 bits: stretched as passphrases are here, out of reach of guessing for as long as shares are kept."""
MIN_WORDS, MAX_WORDS = 6, 32
MAX_PASSPHRASE: Final = 1024
"""The longest passphrase, in bytes."""
_SHORT: Final = 16
_FEW: Final = 6


def draw_passphrase(words: int = DEFAULT_WORDS) -> Secret:
    """Return a random passphrase: words of the list, drawn by the system's source, joined by hyphens.

    Args:
        words: how many, 6 to 32; each is worth 8 bits.

    Raises:
        ParameterError: out of range.

    >>> len(draw_passphrase(6)) >= 6 * 4 - 1
    True
    """
    if not MIN_WORDS <= words <= MAX_WORDS:
        raise ParameterError(f"a passphrase is drawn of {MIN_WORDS} to {MAX_WORDS} words")
    # The words are joined in Python's own memory, which cannot be wiped (SECURITY.md).
    return Secret.of("-".join(secrets.choice(WORDS) for _ in range(words)).encode("ascii"))


def weakness(passphrase: Secret) -> str | None:
    """Say why a passphrase that a person chose looks weak, or return None.

    It is a hint and no measure: a long passphrase out of a book is weak and looks strong.

    Args:
        passphrase: its bytes.

    Returns:
        One sentence without a final stop, or None.
    """
    with passphrase.view() as view:
        different = len(set(view))
        plain = all(32 <= octet < 127 for octet in view)
    # public: a note about a passphrase is shown to whoever has just chosen it.
    if len(passphrase) < _SHORT:
        return f"it is shorter than {_SHORT} characters; a machine can guess it. Draw one: `shares passphrase`"
    if different < _FEW:
        return f"it has fewer than {_FEW} different characters; a machine can guess it. Draw one: `shares passphrase`"
    if not plain:
        return "it holds characters that another keyboard may type as other bytes; plain letters are safer"
    return None
