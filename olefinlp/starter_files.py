"""Where the plants and scenarios that come with the package are."""

from __future__ import annotations

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

    Raises `FileExistsError` naming the first file that is in the way, before anything is copied.
    """
    sources = [p for name in FOLDERS for p in sorted((starter_folder() / name).rglob("*")) if _is_data(p)]
    targets = [folder / p.relative_to(starter_folder()) for p in sources]
    for target in targets:
        if target.exists():
            raise FileExistsError(str(target))
    for source, target in zip(sources, targets, strict=True):
        target.parent.mkdir(parents=True, exist_ok=True)
        shutil.copyfile(source, target)
    return targets


def _is_data(path: Path) -> bool:
    return path.is_file() and path.suffix in (".yaml", ".csv", ".md")
