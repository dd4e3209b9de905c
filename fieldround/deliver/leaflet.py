"""The map library's own files, made to stand inside a page.

In: the installed package XStatic-Leaflet, found by its metadata (importing it would need more).
Out: script and style sheet as text, with no address of any file or host left to load from.
"""

from __future__ import annotations

import base64
import re
from importlib import metadata
from pathlib import Path

from fieldround.rounds.errors import RoundError

_PACKAGE = "XStatic-Leaflet"
_FOLDER = "xstatic/pkg/leaflet/data"


def script() -> str:
    """Leaflet's script, without the pointer to its source map."""
    text = _read("leaflet.js").decode("utf-8")
    text = re.sub(r"^//# sourceMappingURL=.*$", "", text, flags=re.MULTILINE)
    return text.replace("</script", "<\\/script")


def style() -> str:
    """Leaflet's style sheet, its pictures inside it as data addresses."""
    text = _read("leaflet.css").decode("utf-8")
    text = re.sub(r"^\s*behavior:.*$", "", text, flags=re.MULTILINE)  # for a dead browser only
    return re.sub(r"url\((images/[\w.-]+)\)", _as_data, text)


def _as_data(found: re.Match[str]) -> str:
    return f"url(data:image/png;base64,{base64.b64encode(_read(found[1])).decode('ascii')})"


def _read(name: str) -> bytes:
    try:
        place = metadata.distribution(_PACKAGE).locate_file(f"{_FOLDER}/{name}")
        return Path(str(place)).read_bytes()
    except (metadata.PackageNotFoundError, OSError) as error:
        raise RoundError(
            f"The map needs {name} of the Python package {_PACKAGE}, which is not installed "
            f"whole. Install it again with: pip install --force-reinstall {_PACKAGE}"
        ) from error
