"""Options that say where each custodian's share goes.

Source: none.
May import: shares.errors.
Secret: nothing. Public: names, paths.
Does not: look whether a folder is there; whoever writes into it does.
"""

from __future__ import annotations

from pathlib import Path

from shares.errors import ParameterError


def delivery_folders(custodians: tuple[str, ...], deliveries: tuple[str, ...]) -> dict[str, Path]:
    """Return each custodian's folder: NAME=DIR where it is given, else the one DIR for all."""
    own: dict[str, Path] = {}
    common: list[Path] = []
    for delivery in deliveries:
        # A name may hold a sign of equality itself.
        name = max((name for name in custodians if delivery.startswith(f"{name}=")), key=len, default=None)
        if name is None:
            common.append(_common_folder(delivery))
        elif name in own:
            raise ParameterError(f"two delivery folders are given for {name}", where="--deliver")
        elif delivery == f"{name}=":
            raise ParameterError(f"the delivery folder of {name} is empty", where="--deliver")
        else:
            own[name] = Path(delivery.removeprefix(f"{name}="))
    if len(common) > 1:
        raise ParameterError(
            "more than one folder is given for all custodians",
            where="--deliver",
            hint="write NAME=DIR, with a custodian's name",
        )
    without = [name for name in custodians if name not in own]
    if without and not common:
        raise ParameterError(
            f"no delivery folder is given for {', '.join(without)}",
            where="--deliver",
            hint="add NAME=DIR for each of them, or one DIR for all who have none of their own",
        )
    return own | {name: folder for folder in common for name in without}


def _common_folder(delivery: str) -> Path:
    folder = Path(delivery)
    if "=" in delivery and not folder.is_dir():
        raise ParameterError(
            "it begins with no custodian's name, and is no folder",
            where=f"--deliver {delivery}",
            hint="write NAME=DIR with a name given by --custodian",
        )
    return folder
