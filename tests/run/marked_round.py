"""A whole round in a folder, with exact truth and no picture worth looking at.

Invented: an upright pole a pair, ties and limbs marked by hand with a little scatter, photos of
plain grey. What the run makes of it depends on the sheets alone, so it is quick.
"""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import numpy as np
from PIL import Image

from tests.rounds.exif_writing import ASCII, RATIONAL, Value, exif_block, rational

WIDTH, HEIGHT, FOCAL = 1600, 1200, 1500.0
SD_PX = 0.3
TIES = 40
LETTERS = "ab"


@dataclass(frozen=True)
class Made:
    """Where the round lies and the true diameter of each object."""

    folder: Path
    diameters_m: dict[str, float]


def make_round(folder: Path, pairs: int = 2, seed: int = 5) -> Made:
    """Write a round of so many pairs, each with one pole (P1 shows T1, and so on)."""
    random = np.random.default_rng(seed)
    marks, rows, truth = [], [], {}
    (folder / "photos").mkdir(parents=True)
    for i in range(1, pairs + 1):
        diameter = 0.24 + 0.05 * i
        truth[f"T{i}"] = diameter
        stations = np.array([[0.0, 0.0, 1.6], [1.5, 0.1, 1.65]])
        yaws = np.radians([3.0 + i, -6.0])
        foot = np.array([0.7, 8.0 + 0.4 * i, 0.0])
        scene = random.uniform([-3.5, 5.0, 0.0], [4.5, 14.0, 4.0], (TIES, 3))
        for letter, station, yaw in zip(LETTERS, stations, yaws, strict=True):
            photo = f"p{i}{letter}.jpg"
            write_photo(folder / "photos" / photo, i, station)
            seen = {("tie", f"K{i}-{k}"): [point] for k, point in enumerate(scene)}
            for side, name in ((-1.0, "left"), (1.0, "right")):
                heights = np.linspace(0.4, 4.0, 5)
                seen[name, f"T{i}"] = list(limb(station, foot, diameter / 2, side, heights))
            seen["base", f"T{i}"] = [foot]
            for (mark, owner), points in seen.items():
                for point in points:
                    x, y = pixel(point, station, yaw) + random.normal(0.0, SD_PX, 2)
                    if 0 <= x <= WIDTH - 1 and 0 <= y <= HEIGHT - 1:
                        marks.append(f"{owner},{photo},{mark},{x:.2f},{y:.2f},{SD_PX}")
        tape = float(np.linalg.norm(stations[1] - stations[0])) + random.normal(0.0, 0.002)
        rows.append(f"P{i},p{i}a.jpg,p{i}b.jpg,{tape:.4f},0.002")
    write_sheets(folder, rows, marks, list(truth))
    return Made(folder, truth)


def write_sheets(folder: Path, rows: list[str], marks: list[str], names: list[str]) -> None:
    sheets = {
        "pairs.csv": ["pair,photo_a,photo_b,tape_m,tape_sd_m", *rows],
        "objects.csv": [
            "object,kind,pair,ref_height_m",
            *(f"{name},pole,P{name[1:]},1.3" for name in names),
        ],
        "marks.csv": ["object,photo,mark,x_px,y_px,sd_px", *marks],
        "cameras.toml": [
            "[[camera]]",
            'name = "invented"',
            f"size_px = [{WIDTH}, {HEIGHT}]",
            f"focal_px = [{FOCAL}, {FOCAL}]",
            "focal_sd_px = 3.0",
            f"centre_px = [{WIDTH / 2 - 0.5}, {HEIGHT / 2 - 0.5}]",
            "centre_sd_px = 1.0",
            "distortion = [0.0, 0.0, 0.0, 0.0, 0.0]",
            "distortion_sd = [0.001, 0.001, 0.0001, 0.0001, 0.0]",
        ],
        # There is nothing in the pictures, so they are not searched.
        "round.toml": ["[round]", 'title = "Invented quay"', "[ties]", "most = 0"],
    }
    for name, lines in sheets.items():
        (folder / name).write_text("\n".join(lines) + "\n", encoding="utf-8")


def write_photo(path: Path, pair: int, station: np.ndarray) -> None:
    # Some 7 m of latitude from pair to pair; a minute of longitude is good enough for the station.
    seconds = 10.0 + 0.25 * pair + station[1] / 30.9
    gps: dict[int, Value] = {
        0x01: (ASCII, "N"),
        0x02: (RATIONAL, [(52, 1), (30, 1), (round(seconds * 10000), 10000)]),
        0x03: (ASCII, "E"),
        0x04: (RATIONAL, [(5, 1), (0, 1), (round((20 + station[0] / 18.8) * 10000), 10000)]),
        0x10: (ASCII, "T"),
        0x11: rational(2.0),
        0x1F: rational(4.0),
    }
    exif = {0x9003: (ASCII, f"2031:05:04 10:{pair:02d}:00"), 0x9011: (ASCII, "+02:00")}
    block = exif_block(exif=exif, gps=gps)
    # Grey of its own a photo, so that no two files are the same.
    grey = Image.new("RGB", (WIDTH, HEIGHT), (100 + pair, 100, 100 + int(station[0] * 10)))
    grey.save(path, quality=60, exif=b"Exif\0\0" + block)


def pixel(point: np.ndarray, station: np.ndarray, yaw: float) -> np.ndarray:
    """Where a level camera shows a point; x east, y north, z up, yaw clockwise from north."""
    right = np.array([np.cos(yaw), -np.sin(yaw), 0.0])
    ahead = np.array([np.sin(yaw), np.cos(yaw), 0.0])
    offset = point - station
    plane = np.array([offset @ right, -offset[2]]) / (offset @ ahead)
    return FOCAL * plane + [WIDTH / 2 - 0.5, HEIGHT / 2 - 0.5]


def limb(
    station: np.ndarray, foot: np.ndarray, radius: float, side: float, heights: np.ndarray
) -> np.ndarray:
    """Points where the line of sight touches an upright cylinder; side -1 left, +1 right."""
    across = (foot - station)[:2]
    distance = float(np.hypot(*across))
    turn = np.arctan2(across[0], across[1]) + side * np.arcsin(radius / distance)
    reach = np.sqrt(distance**2 - radius**2)
    touch = station[:2] + reach * np.array([np.sin(turn), np.cos(turn)])
    return np.column_stack([np.tile(touch, (len(heights), 1)), heights])
