"""Crops inside the GeoPackage (related tables extension, media, OGC 18-000).

In: an open GeoPackage and the crops. Out: table `crops` with the pictures and `objects_crops`,
which relates each to its object.
"""

from __future__ import annotations

import sqlite3
from collections.abc import Iterator, Sequence

from fieldround.deliver.crops import CropsByView

_DEFINITION = "http://docs.opengeospatial.org/is/18-000/18-000.html"
_SQL = (
    """CREATE TABLE gpkgext_relations (
  id INTEGER PRIMARY KEY AUTOINCREMENT,
  base_table_name TEXT NOT NULL,
  base_primary_column TEXT NOT NULL DEFAULT 'id',
  related_table_name TEXT NOT NULL,
  related_primary_column TEXT NOT NULL DEFAULT 'id',
  relation_name TEXT NOT NULL,
  mapping_table_name TEXT NOT NULL UNIQUE
)""",
    """CREATE TABLE crops (
  fid INTEGER PRIMARY KEY AUTOINCREMENT NOT NULL,
  data BLOB NOT NULL,
  content_type TEXT NOT NULL,
  object TEXT,
  photo TEXT,
  shows TEXT
)""",
    """CREATE TABLE objects_crops (
  base_id INTEGER NOT NULL,
  related_id INTEGER NOT NULL
)""",
)
_FIELDS = (
    ("data", "Picture", "The crop, without any metadata.", "image/jpeg"),
    ("content_type", "Type", "Media type of the picture.", None),
    ("object", "Object", "Name of the object.", None),
    ("photo", "Photo", "Photo the crop was cut from, as the sheets name it.", None),
    ("shows", "Shows", "The whole object or its section.", None),
)


def write_media(
    db: sqlite3.Connection, crops: CropsByView, objects: Sequence[str], when: str
) -> None:
    """Write the crops of the report's size; `objects` are the names in the order of their rows."""
    for statement in _SQL:
        db.execute(statement)
    db.execute(
        "INSERT INTO gpkg_contents (table_name, data_type, identifier, description, last_change)"
        " VALUES ('crops', 'attributes', 'crops', 'Crops of the photos, one object each.', ?)",
        (when,),
    )
    db.executemany(
        "INSERT INTO gpkg_extensions VALUES (?, NULL, 'gpkg_related_tables', ?, 'read-write')",
        [(table, _DEFINITION) for table in ("gpkgext_relations", "objects_crops")],
    )
    db.execute(
        "INSERT INTO gpkgext_relations VALUES"
        " (1, 'objects', 'fid', 'crops', 'fid', 'media', 'objects_crops')"
    )
    db.executemany(
        "INSERT INTO gpkg_data_columns VALUES ('crops', ?, ?, ?, ?, ?, NULL)",
        [(name, name, alias, about, mime) for name, alias, about, mime in _FIELDS],
    )
    rows = {name: i for i, name in enumerate(objects, 1)}
    for number, (name, photo, shows, jpeg) in enumerate(_pictures(crops, objects), 1):
        db.execute(
            "INSERT INTO crops VALUES (?, ?, 'image/jpeg', ?, ?, ?)",
            (number, jpeg, name, photo, shows),
        )
        db.execute("INSERT INTO objects_crops VALUES (?, ?)", (rows[name], number))


def _pictures(crops: CropsByView, objects: Sequence[str]) -> Iterator[tuple[str, str, str, bytes]]:
    order = {name: i for i, name in enumerate(objects)}
    for name, photo in sorted(crops, key=lambda key: (order[key[0]], key[1])):
        views = crops[name, photo]
        for shows, crop in (("whole", views.whole), ("section", views.section)):
            if crop is not None:
                yield name, photo, shows, crop.jpeg
