"""Where the catalog files are: inside the installed package, or beside it in a checkout."""

from __future__ import annotations

from pathlib import Path

from synth.errors import CatalogError

PACKAGE = Path(__file__).resolve().parents[1]


def catalog_path(name: str, package: Path = PACKAGE) -> Path:
    """Find a catalog file, e.g. "op_amps.toml".

    A wheel carries the catalogs inside the package; an editable install sees only the folder beside it.

    Args:
        name: file name without folder.
        package: folder of the package `synth`.

    Raises:
        CatalogError: the file is in neither place.

    >>> catalog_path("e_series.toml").name
    'e_series.toml'
    """
    places = (package / "catalogs" / name, package.parent / "catalogs" / name)
    for place in places:
        if place.is_file():
            return place
    looked = " nor ".join(str(place) for place in places)
    raise CatalogError(f"catalog {name}: found neither {looked}; install the package again or restore the file")
