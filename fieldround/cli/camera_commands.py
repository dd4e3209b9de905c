"""`fieldround camera`: the cameras that a round has found for itself.

In: a round that was run. Out: camera cards on stdout, or added to another round's cameras.toml.
"""

from __future__ import annotations

from pathlib import Path

import click

from fieldround.cli.failing import failures_told


@click.group()
def camera() -> None:
    """Camera cards that a round has found for itself."""


@camera.command()
@click.argument("folder", metavar="DIR", type=click.Path(path_type=Path))
@click.option(
    "--out",
    "out_dir",
    metavar="DIR",
    type=click.Path(path_type=Path, file_okay=False),
    help="Folder of the results; DIR/out if left out.",
)
@click.option("--camera", "wanted", metavar="TEXT", help="Keep only the camera of this name.")
@click.option("--name", "new_name", metavar="TEXT", help="Name of the card; needs one camera.")
@click.option(
    "--to",
    "target",
    metavar="FILE",
    type=click.Path(path_type=Path, dir_okay=False),
    help="Add the cards to this cameras.toml of another round; print them if left out.",
)
@click.option("--debug", is_flag=True, help="Show the traceback when the work fails.")
def keep(
    folder: Path,
    out_dir: Path | None,
    wanted: str | None,
    new_name: str | None,
    target: Path | None,
    debug: bool,
) -> None:
    """Keep the cameras that the round in DIR found, as cards for the NEXT rounds.

    A card holds for one camera, lens and zoom. Do not use it for the same round again: its photos
    would be counted twice and the intervals would come out too narrow.
    """
    with failures_told(debug):
        from dataclasses import replace

        from fieldround.run.cameras_kept import KeepError, add_cards, cards_text, found_cameras

        found = found_cameras(folder / "out" if out_dir is None else out_dir)
        if wanted is not None:
            if wanted not in found:
                names = ", ".join(repr(name) for name in found)
                raise KeepError(f"the round found no camera {wanted!r}; it has {names or 'none'}")
            found = {wanted: found[wanted]}
        if not found:
            raise KeepError("the round found no camera; its pairs have no result")
        cameras = list(found.values())
        if new_name is not None:
            if len(cameras) > 1:
                raise KeepError("--name needs one camera; choose it with --camera")
            cameras = [replace(cameras[0], name=new_name)]
        if target is None:
            click.echo(cards_text(cameras), nl=False)
        elif target.resolve() == (folder / "cameras.toml").resolve():
            raise KeepError(
                f"{target} belongs to the round that found these cameras; a card counts its "
                "photos once already, so keep it for another round"
            )
        else:
            add_cards(target, cameras)
            click.echo(f"{len(cameras)} added to {target}.")
