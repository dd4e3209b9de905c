"""A round's folder, read whole.

In: the folder a person filled. Out: a `Round`, or a `SheetsError` with every fault of every file.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from pathlib import Path

from fieldround.rounds.cards import (
    Card,
    CardMisfitError,
    CardsAmbiguousError,
    match_card,
    read_cards,
)
from fieldround.rounds.check_sheet import read_checks
from fieldround.rounds.errors import Fault, PictureError, SheetsError
from fieldround.rounds.exif_cards import camera_from_exif
from fieldround.rounds.landmarks import read_landmarks
from fieldround.rounds.marks import judge_marks, read_marks_sheet
from fieldround.rounds.model import Camera, Photo, Round
from fieldround.rounds.objects import objects_from_marks, read_objects, with_pairs
from fieldround.rounds.pairs import read_pairs
from fieldround.rounds.photos import PhotoFile, PhotoFolder, read_photo
from fieldround.rounds.settings import read_settings
from fieldround.rounds.track_folder import read_tracks
from fieldround.rounds.tracks import place_on_tracks

FILES = ("round.toml", "cameras.toml", "photos", "pairs.csv", "objects.csv", "marks.csv",
         "checks.csv", "landmarks.csv")  # fmt: skip


def load_round(folder: Path) -> Round:
    """Read everything a person put into a round's folder.

    raises : SheetsError with every fault of every file, in the order of the files

    A photo that exists but cannot be used is no fault: it stands in `Round.lost_photos` with a
    sentence, its pairs and marks stay as written, and its name is not in `Round.photos`.
    """
    folder = Path(folder)
    faults: list[Fault] = []
    if not folder.is_dir():
        raise SheetsError([Fault(str(folder), None, None, None, "there is no such folder")])
    settings = read_settings(folder / "round.toml", faults)
    cards = read_cards(folder / "cameras.toml", faults)
    photo_folder = None
    if (folder / "photos").is_dir():
        photo_folder = PhotoFolder(folder / "photos")
    else:
        remedy = "the folder is missing; put the round's photos into it"
        faults.append(Fault("photos", None, None, None, remedy))
    sheet = read_pairs(folder / "pairs.csv", photo_folder, settings, faults)
    named = [name for name in dict.fromkeys(sheet.photos.values()) if name is not None]
    photos, cameras, lost, notes = _photos(folder / "photos", named, cards, faults)
    listed = read_objects(folder / "objects.csv", sheet.names, settings, faults)
    landmarks, landmark_notes = read_landmarks(folder / "landmarks.csv", settings, faults)
    marks_sheet = read_marks_sheet(folder / "marks.csv", settings, faults)
    marks = judge_marks(
        marks_sheet,
        photo_folder,
        sheet.photos,
        named,
        {name: photo.size_px for name, photo in photos.items()},
        {one.object: one for one in listed.objects} if listed.complete else None,
        listed.names,
        [one.landmark for one in landmarks],
    )
    objects = listed.objects
    has_sheet = (folder / "objects.csv").exists()
    if not has_sheet:
        objects = objects_from_marks(marks, settings)
    names: Sequence[str] | None = [one.object for one in objects]
    if has_sheet:
        names = listed.names if listed.complete else None
    checks, check_notes = read_checks(folder / "checks.csv", names, faults)
    tracks = read_tracks(folder / "tracks", settings.tracks, photo_folder, faults)
    if faults:
        raise SheetsError(_in_order(faults))
    photos, track_notes = place_on_tracks(photos, tracks.tracks, tracks.points, settings.tracks)
    return Round(
        folder=folder,
        settings=settings,
        cameras=cameras,
        photos=photos,
        pairs=sheet.pairs,
        objects=with_pairs(objects, sheet.pairs, marks),
        marks=marks,
        checks=checks,
        lost_photos=lost,
        notes=(*sheet.notes, *listed.notes, *marks_sheet.notes, *check_notes, *notes,
               *landmark_notes, *tracks.notes, *track_notes),
        landmarks=landmarks,
    )


def _photos(
    folder: Path, names: Sequence[str], cards: Sequence[Card], faults: list[Fault]
) -> tuple[dict[str, Photo], dict[str, Camera], dict[str, str], list[str]]:
    """Photos by name, the cameras they use, lost photos with a sentence each, notes."""
    photos: dict[str, Photo] = {}
    cameras: dict[str, Camera] = {}
    lost: dict[str, str] = {}
    notes: dict[str, None] = {}
    for name in names:
        try:
            file = read_photo(folder / name)
            camera, turn_deg, note = _camera_of(file, cards)
        except (PictureError, CardMisfitError) as wrong:
            lost[name] = f"photo {name}: {wrong}"
            continue
        except CardsAmbiguousError as wrong:
            remedy = str(wrong)
            faults.append(
                Fault("cameras.toml", wrong.card.row, "name", wrong.card.camera.name, remedy)
            )
            continue
        if note:
            notes[note] = None
        cameras[camera.name] = camera
        photos[name] = _photo(name, file, camera, turn_deg)
    return photos, cameras, lost, list(notes)


def _camera_of(file: PhotoFile, cards: Sequence[Card]) -> tuple[Camera, int, str]:
    """Camera, turn of its picture to the photo, a note for the round or ''."""
    width, height = file.size_px
    landscape_px = (max(width, height), min(width, height))
    stored_upright = file.orientation == 1 and height > width and file.exif.orientation == 1
    matched = match_card(cards, file.exif, landscape_px, stored_upright)
    if matched is not None:
        camera, portrait, note = matched
        return camera, 0 if portrait else file.turn_deg, note
    camera, note = camera_from_exif(file.exif, landscape_px)
    return camera, file.turn_deg, note


def _photo(name: str, file: PhotoFile, camera: Camera, turn_deg: int) -> Photo:
    exif = file.exif
    return Photo(
        name=name,
        path=file.path,
        size_px=file.size_px,
        turn_deg=turn_deg,
        camera=camera.name,
        taken_at=exif.taken_at,
        fix=exif.fix,
        direction_deg=exif.direction_deg,
        direction_from=exif.direction_from,
        make=exif.make,
        model=exif.model,
        lens=exif.lens,
        focal_mm=exif.focal_mm,
        focal_35mm=exif.focal_35mm,
        problems=exif.problems,
        digest=file.digest,
        orientation=file.orientation,
    )


def _in_order(faults: Iterable[Fault]) -> list[Fault]:
    """Each fault once, by file, then by line; within a line as found."""
    place = {name: index for index, name in enumerate(FILES)}
    unique = dict.fromkeys(faults)
    return sorted(unique, key=lambda fault: (place.get(fault.file, 99), fault.row or 0))
