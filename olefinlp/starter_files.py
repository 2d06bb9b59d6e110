"""Where the plants and scenarios that come with the package are."""

from __future__ import annotations

import os
import shutil
from pathlib import Path

DEFAULT = Path("scenarios") / "brackwater_2031_03.yaml"
FOLDERS = ("models", "scenarios")


def starter_folder() -> Path:
    """The folder that holds `models/` and `scenarios/`: inside the package, or the source tree."""
    inside = Path(__file__).parent / "starter"
    return inside if inside.is_dir() else Path(__file__).parent.parent


def default_scenario() -> Path:
    """The demo month: of this folder if it has one, else of the package."""
    return DEFAULT if DEFAULT.exists() else starter_folder() / DEFAULT


def copy_starter(folder: Path) -> list[Path]:
    """Copy the starter plants and scenarios into a folder; nothing that is there is replaced.

    Raises `FileExistsError` naming the first file that is in the way, before anything is copied, and
    another `OSError` when a file cannot be written; what was copied by then is taken away again.
    """
    start = starter_folder()
    sources = [p for name in FOLDERS for p in sorted((start / name).rglob("*")) if _is_data(p)]
    targets = [folder / p.relative_to(start) for p in sources]
    for target in targets:
        _refuse_what_is_there(target)
    copied: list[Path] = []
    try:
        for source, target in zip(sources, targets, strict=True):
            target.parent.mkdir(parents=True, exist_ok=True)
            copied.append(target)
            shutil.copyfile(source, target)
    except OSError:
        for target in copied:
            target.unlink(missing_ok=True)
        raise
    return targets


def _refuse_what_is_there(target: Path) -> None:
    """Raise `FileExistsError` for the target, or for a file that stands where a folder of it must be."""
    if os.path.lexists(target):
        raise FileExistsError(str(target))
    for above in reversed(target.parents):
        if os.path.lexists(above) and not above.is_dir():
            raise FileExistsError(str(above))


def _is_data(path: Path) -> bool:
    return path.is_file() and path.suffix in (".yaml", ".csv", ".md")
