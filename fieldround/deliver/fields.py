"""The one table of every field of every delivered layer and table.

In: nothing. Out: `TABLES`, which drives the GeoPackage (columns, aliases, descriptions), the CSV,
the GeoJSON and docs/fields.md (`python -m fieldround.deliver.fields` prints that page).
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

from fieldround.rounds.model import KINDS
from fieldround.solve.results import BUDGET_SOURCES, VERDICTS


@dataclass(frozen=True)
class Field:
    """One column: its name, SQL type, unit, alias for people, description.

    digits : decimals that are written (of a REAL); choices : the values it may have, if few
    """

    name: str
    type: str
    unit: str
    alias: str
    description: str
    digits: int = 5
    choices: tuple[str, ...] = ()


@dataclass(frozen=True)
class Table:
    """One layer (with the name of its geometry type) or one table without geometry."""

    name: str
    geometry: str | None
    title: str
    description: str
    fields: tuple[Field, ...]


def _text(name: str, alias: str, description: str, choices: tuple[str, ...] = ()) -> Field:
    return Field(name, "TEXT", "", alias, description, choices=choices)


def _count(name: str, alias: str, description: str) -> Field:
    return Field(name, "INTEGER", "", alias, description)


def _real(name: str, unit: str, alias: str, description: str, digits: int = 5) -> Field:
    return Field(name, "REAL", unit, alias, description, digits)


def _time(name: str, alias: str, description: str) -> Field:
    return Field(name, "DATETIME", "UTC", alias, description)


_OBJECT = _text("object", "Object", "Name of the object, unique in the round.")
_KIND = _text("kind", "Kind", "What the object is.", KINDS)
_VERDICT = _text(
    "verdict",
    "Verdict",
    "accept: within the round's tolerance and consistent; remeasure: see the reasons; "
    "no result: no diameter could be found.",
    VERDICTS,
)
_PAIR = _text("pair", "Pair", "Name of the pair of photos.")
_PHOTO = _text("photo", "Photo", "Photo as the sheets name it, relative to photos/.")
_PHOTO_PATH = _text("photo_path", "Photo file", "Path of the photo, relative to this file.")
_VIEW = _text("view", "View", "Which station of the pair: A, B, C …")
_TAKEN_AT = _time("taken_at", "Taken at", "When photo A was taken, in UTC; empty if not known.")
_TAKEN_LOCAL = _text(
    "taken_local", "Taken, local time", "The same time as the camera's clock shows it."
)
_POSITION_SD = _real(
    "position_sd_m", "m", "Position sd", "Standard deviation of the position along its worst axis."
)
_DIAMETER = _real("diameter_m", "m", "Diameter", "Diameter at the reference height.")
_LO = _real("diameter_lo_m", "m", "Diameter, low", "Lower end of the diameter's 95 % interval.")
_HI = _real("diameter_hi_m", "m", "Diameter, high", "Upper end of the diameter's 95 % interval.")
_REF_HEIGHT = _real(
    "ref_height_m", "m", "Reference height", "Height above the ground line of the section."
)
_ELEVATION = _real("elevation_m", "m", "Elevation", "Elevation of the point, see elevation_is.", 3)
_ELEVATION_IS = _text("elevation_is", "Elevation is", "What the elevation refers to.")

OBJECT_FIELDS = (
    _OBJECT,
    _KIND,
    _text("label", "Label", "Label from objects.csv."),
    _text("pair", "Pair", "Pair of photos that gave the figures."),
    _count("views", "Views", "Number of photos in which the object is marked."),
    _DIAMETER,
    _real("diameter_sd_m", "m", "Diameter sd", "Standard deviation of the diameter."),
    _LO,
    _HI,
    _real("reading_a_m", "m", "Reading A", "Diameter that view A alone gives."),
    _real("reading_b_m", "m", "Reading B", "Diameter that view B alone gives."),
    _real(
        "agreement",
        "sd",
        "Agreement",
        "Reading A minus reading B in standard deviations of that difference.",
        3,
    ),
    _real("girth_m", "m", "Girth", "Girth at the reference height: pi times the diameter."),
    _REF_HEIGHT,
    _real("ground_diameter_m", "m", "Ground-line diameter", "Diameter at the ground line."),
    _real(
        "taper_mm_per_m",
        "mm/m",
        "Taper",
        "Change of the diameter a metre upwards, in millimetres; negative where it narrows.",
        3,
    ),
    _real("height_m", "m", "Height", "Height of the top above the ground line.", 4),
    _real("height_sd_m", "m", "Height sd", "Standard deviation of the height.", 4),
    _real("lean_deg", "degree", "Lean", "Angle of the axis from the vertical.", 4),
    _real("lean_sd_deg", "degree", "Lean sd", "Standard deviation of the lean.", 4),
    _real(
        "lean_to_deg",
        "degree",
        "Leans to",
        "Direction in which the top leans, clockwise from true north.",
        2,
    ),
    _real("range_m", "m", "Range", "Distance from station A to the object.", 4),
    _real("baseline_m", "m", "Baseline", "Distance between the stations A and B."),
    _real("baseline_sd_m", "m", "Baseline sd", "Standard deviation of the baseline."),
    _text("baseline_from", "Baseline from", "What gave the baseline its length."),
    _text("orientation_from", "Orientation from", "What turned the two photos to each other."),
    _text("heading_from", "Heading from", "What turned the pair to north."),
    _POSITION_SD,
    _VERDICT,
    _text("reasons", "Reasons", "Why the verdict is what it is, in plain words, '; ' between."),
    _text("photo_a", "Photo A", "Photo of view A as the sheets name it, relative to photos/."),
    _text("photo_b", "Photo B", "Photo of view B as the sheets name it, relative to photos/."),
    _TAKEN_AT,
    _TAKEN_LOCAL,
    _ELEVATION,
    _ELEVATION_IS,
    _text("photo_a_path", "Photo A file", "Path of photo A, relative to this file."),
    _text("photo_b_path", "Photo B file", "Path of photo B, relative to this file."),
)

# The sheet has no geometry column, so it carries the coordinates as columns of its own.
COORDINATE_FIELDS = (
    _real("easting", "CRS unit", "Easting", "Easting in the round's CRS.", 4),
    _real("northing", "CRS unit", "Northing", "Northing in the round's CRS.", 4),
    _real("longitude", "degree", "Longitude", "Longitude, WGS 84.", 9),
    _real("latitude", "degree", "Latitude", "Latitude, WGS 84.", 9),
)

TABLES = (
    Table(
        "objects",
        "POINT",
        "Objects",
        "One point an object, where its axis meets the ground line (a ball's centre).",
        OBJECT_FIELDS,
    ),
    Table(
        "sections",
        "POLYGON",
        "Sections",
        "The circle of the found diameter around the object's point, true to scale (a pipe's too).",
        (_OBJECT, _KIND, _VERDICT, _DIAMETER, _LO, _HI, _REF_HEIGHT),
    ),
    Table(
        "stations",
        "POINT",
        "Stations",
        "One point a photo, where the camera stood.",
        (
            _PAIR,
            _VIEW,
            _PHOTO,
            _PHOTO_PATH,
            _text("camera", "Camera card", "Camera card of the photo."),
            _time("taken_at", "Taken at", "When the photo was taken, in UTC; empty if not known."),
            _TAKEN_LOCAL,
            _POSITION_SD,
            _ELEVATION,
            _ELEVATION_IS,
        ),
    ),
    Table(
        "sightlines",
        "LINESTRING",
        "Sightlines",
        "One line from a station to each object that is marked in its photo.",
        (
            _OBJECT,
            _PAIR,
            _VIEW,
            _PHOTO,
            _real("range_m", "m", "Range", "Distance from this station to the object.", 4),
            _real("diameter_m", "m", "Reading", "Diameter that this view alone gives."),
            _VERDICT,
        ),
    ),
    Table(
        "ellipses",
        "POLYGON",
        "Error ellipses",
        "The ellipse that holds the object's position with 95 % probability.",
        (
            _OBJECT,
            _real("semi_major_m", "m", "Semi-major axis", "Longer semi-axis, on the ground."),
            _real("semi_minor_m", "m", "Semi-minor axis", "Shorter semi-axis, on the ground."),
            _real(
                "azimuth_deg",
                "degree",
                "Azimuth",
                "Direction of the longer axis, clockwise from true north.",
                2,
            ),
            _POSITION_SD,
        ),
    ),
    Table(
        "readings",
        None,
        "Readings",
        "The diameter that one view alone gives of one object.",
        (
            _OBJECT,
            _PAIR,
            _PHOTO,
            _real("diameter_m", "m", "Reading", "Diameter that this view alone gives."),
            _real("sd_m", "m", "Reading sd", "Standard deviation of the reading."),
            _real("range_m", "m", "Range", "Distance from this station to the object.", 4),
        ),
    ),
    Table(
        "budget",
        None,
        "Budget",
        "The diameter's variance split by source; the shares of one object sum to 100 %.",
        (
            _OBJECT,
            _text("source", "Source", "Where this part comes from.", BUDGET_SOURCES),
            _real("variance_m2", "m2", "Variance", "This source's part of the variance.", 12),
            _real("sd_m", "m", "As sd", "Square root of the variance part.", 6),
            _real("share_pct", "%", "Share", "Part of the whole variance, in percent.", 3),
        ),
    ),
    Table(
        "pairs",
        None,
        "Pairs",
        "One row a pair of photos: how it was oriented and scaled.",
        (
            _PAIR,
            _text("photos", "Photos", "Photos of the pair, A first, '; ' between."),
            _text("status", "Status", "Whether the pair could be used."),
            _text("reasons", "Reasons", "What is to be known of the pair, '; ' between."),
            _count("ties_found", "Ties found", "Ties found in the pictures or marked by hand."),
            _count("ties_used", "Ties used", "Ties kept by the adjustment."),
            _real("tie_rms_px", "px", "Tie rms", "Root mean square of the tie residuals.", 3),
            _real("baseline_m", "m", "Baseline", "Distance between the stations A and B."),
            _real("baseline_sd_m", "m", "Baseline sd", "Standard deviation of the baseline."),
            _text("baseline_from", "Baseline from", "What gave the baseline its length."),
            _real("tape_m", "m", "Tape", "Tape reading from camera A to camera B, as typed."),
            _text("orientation_from", "Orientation from", "What turned the photos to each other."),
            _real("parallax_deg", "degree", "Parallax", "Angle between the two lines of sight.", 3),
            _text("vertical_from", "Vertical from", "What told the pair where up is."),
            _real(
                "vertical_sd_deg", "degree", "Vertical sd", "Standard deviation of the vertical.", 4
            ),
            _text("heading_from", "Heading from", "What turned the pair to north."),
            _real("heading_deg", "degree", "Heading", "Where camera A looks, from true north.", 3),
            _real(
                "heading_sd_deg", "degree", "Heading sd", "Standard deviation of the heading.", 3
            ),
        ),
    ),
    Table(
        "checks",
        None,
        "Checks",
        "A found diameter beside an independent direct measurement of the same object.",
        (
            _OBJECT,
            _real("diameter_m", "m", "Found", "Diameter found from the photos."),
            _real("diameter_sd_m", "m", "Found sd", "Standard deviation of the found diameter."),
            _real("check_m", "m", "Direct", "Diameter measured directly."),
            _real("check_sd_m", "m", "Direct sd", "Standard deviation of the direct measurement."),
            _real("difference_m", "m", "Difference", "Found minus direct."),
            _real(
                "en_number",
                "",
                "En number",
                "Difference over the root sum of squares of both expanded (k = 2) uncertainties; "
                "-1 to 1 is satisfactory (ISO 13528).",
                3,
            ),
            _text("method", "Method", "How the direct measurement was made."),
            _text("measured_on", "Measured on", "When, as typed."),
            _text("by", "By", "By whom, as typed."),
        ),
    ),
    Table(
        "round",
        None,
        "Round",
        "The round as a whole, one row.",
        (
            _text("title", "Title", "Title of the round."),
            _text("crew", "Crew", "Who walked it."),
            _text("place", "Place", "Where."),
            _time("first_taken_at", "First photo", "Time of the first photo, UTC."),
            _time("last_taken_at", "Last photo", "Time of the last photo, UTC."),
            _text("crs", "CRS", "Name of the CRS of eastings and northings."),
            _count("epsg", "EPSG", "Code of that CRS, where it has one."),
            _real(
                "convergence_deg",
                "degree",
                "Grid convergence",
                "Grid convergence in the middle of the round.",
                6,
            ),
            _real("scale_factor", "", "Scale factor", "Grid length over ground length there.", 9),
            _count("objects", "Objects", "Number of objects."),
            _count("accepted", "Accepted", "Number of objects with verdict accept."),
            _count("to_remeasure", "To measure again", "Number with verdict remeasure."),
            _count("without_result", "Without result", "Number with verdict no result."),
            _count("pairs", "Pairs", "Number of pairs."),
            _count("photos", "Photos", "Number of photos read."),
            _real("tolerance_pct", "%", "Tolerance", "Largest accepted half interval, percent.", 3),
            _real("agreement_limit", "sd", "Agreement limit", "Largest accepted agreement.", 3),
            _text("notes", "Notes", "What is to be known of the whole round, '; ' between."),
            _text("program", "Program", "Program and version that made this file."),
        ),
    ),
)

BY_NAME = {table.name: table for table in TABLES}


def passed_through(names: Iterable[str], taken: Iterable[str]) -> dict[str, Field]:
    """Fields for the columns a person added to a sheet, renamed where a name is taken.

    names   : column names as typed; taken : names of the columns that are already there
    returns : typed name -> TEXT field. Names differ from all others even without regard to
              case, as a database compares them; a taken name gets `_given` at its end.
    """
    used = {name.casefold() for name in taken} | {"fid", "geom", "rowid", "oid", "_rowid_"}
    found: dict[str, Field] = {}
    for typed in names:
        if typed in found:
            continue
        # A quote, a line break or a control character in a column name breaks other programs.
        clean = "".join(" " if not c.isprintable() else "'" if c == '"' else c for c in typed)
        clean = " ".join(clean.split()) or "column"
        name, count = clean, 1
        while name.casefold() in used:
            name = f"{clean}_given" if count == 1 else f"{clean}_given_{count}"
            count += 1
        used.add(name.casefold())
        found[typed] = _text(name, typed.strip() or "column", "Passed through from the sheet.")
    return found


def page() -> str:
    """The text of docs/fields.md."""
    lines = [
        "# Fields of the results",
        "",
        "Made from the program: `python -m fieldround.deliver.fields > docs/fields.md`.",
        "",
        "Lengths are metres, angles degrees, bearings clockwise from true north. An empty value",
        "means that the figure could not be found; the reasons say why. Columns that a person",
        "added to a sheet follow the fields below; one whose name is taken gets `_given` at its",
        "end. `results.csv` and `results.geojson` carry the fields of `objects`.",
    ]
    for table in TABLES:
        kind = f"layer, {table.geometry.lower()}" if table.geometry else "table"
        lines += ["", f"## {table.name} ({kind})", "", table.description, ""]
        lines += _rows(table.fields)
        if table.name == "objects":
            lines += ["", "The sheet `results.csv` has these beside them:", ""]
            lines += _rows(COORDINATE_FIELDS)
    return "\n".join(lines) + "\n"


def _rows(fields: Iterable[Field]) -> list[str]:
    rows = ["| field | type | unit | alias | description |", "|---|---|---|---|---|"]
    for f in fields:
        about = f.description
        if f.choices:
            about += " One of: " + ", ".join(f"`{choice}`" for choice in f.choices) + "."
        rows.append(f"| {f.name} | {f.type} | {f.unit} | {f.alias} | {about} |")
    return rows


if __name__ == "__main__":
    print(page(), end="")
