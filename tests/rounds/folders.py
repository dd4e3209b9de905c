"""Small rounds in a folder, for tests of the readers. All contents invented."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from PIL import Image

from fieldround.rounds.errors import Fault, SheetsError
from fieldround.rounds.load import load_round
from tests.rounds.exif_writing import exif_block

SHARED = Path(__file__).resolve().parents[3] / "shared"

PAIRS = "pair,photo_a,photo_b,tape_m\nP1,a.jpg,b.jpg,1.5\n"
OBJECTS = "object,kind,pair\nT1,trunk,P1\n"
MARKS = "object,photo,mark,x_px,y_px,sd_px\nT1,a.jpg,left,10,20,0.5\nT1,b.jpg,right,30,20,\n"


def picture(size: tuple[int, int] = (64, 48)) -> Image.Image:
    """A picture whose every quarter looks different."""
    width, height = size
    x, y = np.meshgrid(np.linspace(0, 255, width), np.linspace(0, 255, height))
    pixels = np.stack([x, y, (x * y) / 255.0], axis=2).astype(np.uint8)
    return Image.fromarray(pixels)


def write_photo(path: Path, size: tuple[int, int] = (64, 48), exif: bytes | None = None) -> Path:
    path.parent.mkdir(parents=True, exist_ok=True)
    block = {} if exif is None else {"exif": b"Exif\0\0" + exif}
    picture(size).save(path, quality=90, **block)
    return path


def write_round(folder: Path, photos: tuple[str, ...] = ("a.jpg", "b.jpg"), **files: str) -> Path:
    """A round with two photos; `files` such as pairs_csv="..." replace or add its files.

    An empty string writes an empty file, None leaves the file out.
    """
    contents: dict[str, str | bytes | None] = {"pairs_csv": PAIRS}
    contents.update(files)
    for name in photos:
        write_photo(folder / "photos" / name, exif=exif_block(image={0x112: (3, [1])}))
    (folder / "photos").mkdir(parents=True, exist_ok=True)
    for key, content in contents.items():
        stem, _, ending = key.rpartition("_")
        if isinstance(content, str):
            content = content.encode("utf-8")
        if content is not None:
            (folder / f"{stem}.{ending}").write_bytes(content)
    return folder


def faults_of(folder: Path) -> tuple[Fault, ...]:
    """The faults of a round that must have some."""
    with pytest.raises(SheetsError) as caught:
        load_round(folder)
    assert str(caught.value).count("\n") + 1 >= len(caught.value.faults)
    return caught.value.faults


def one_fault(folder: Path) -> Fault:
    """The only fault of a round."""
    faults = faults_of(folder)
    assert len(faults) == 1, [fault.sentence() for fault in faults]
    return faults[0]


def place(fault: Fault) -> tuple[str, int | None, str | None, str | None]:
    return fault.file, fault.row, fault.column, fault.value


def shared(*parts: str) -> Path:
    """A folder of the practice data, which lies beside the repository where it is there at all."""
    folder = SHARED.joinpath(*parts)
    if not folder.exists():
        pytest.skip("the practice data are not beside the repository")
    return folder
