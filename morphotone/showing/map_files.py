"""The files that the map of one cell comes to, as bytes, and the places they have below the maps' folder."""

from dataclasses import dataclass
from typing import Any, NamedTuple

import trimesh

from morphotone.errors import MorphotoneError
from morphotone.night.outcome import csv_line
from morphotone.questions.portrait import Portrait
from morphotone.showing.keys import column_words, is_logarithmic
from morphotone.showing.maps import WIDTHS_MM, colour_bar, map_figure, thumbnail
from morphotone.showing.mesh import MESH_KINDS, AreaCheck, MeshKind, area_check, membrane_mesh, mesh_bytes
from morphotone.showing.panels import PLANES, Plane
from morphotone.showing.sheet import FORMATS, Format, figure_bytes
from morphotone.showing.tables import csv_texts

#: Columns of ``maps.csv`` after the names: paths of files, empty where none was asked for, ...
FILES = ("figure", "thumbnail", "mesh", "colour_bar", "table")
#: ... and the mesh's area beside the cable's.
AREAS = ("mesh_area_um2", "cable_area_um2", "facet_error", "area_agrees")
COLUMNS = (*FILES, *AREAS)
_THUMBNAIL_DPI = 96


@dataclass(frozen=True)
class MapRequest:
    """What is asked of every cell's map.

    Attributes
    ----------
    formats : tuple of {"png", "svg", "pdf"}
        Of the figure; the first stands in ``maps.csv``.
    width_mm : int
        Of the figure.
    plane : {"xy", "xz", "yz"}
        Coordinates that go across and up.
    hz : float
        Frequency that is shown.
    colour : str or None
        Column of the table by sample that colours; log attenuation toward the soma if None.
    mesh : {"glb", "ply", "obj"} or None
        Kind of mesh, if one is wanted.

    Raises
    ------
    MorphotoneError
        One of them is none of these.
    """

    formats: tuple[Format, ...] = ("png",)
    width_mm: int = 175
    plane: Plane = "xy"
    hz: float = 0.0
    colour: str | None = None
    mesh: MeshKind | None = None

    def __post_init__(self) -> None:
        allowed = [
            (set(self.formats) - set(FORMATS) or not self.formats, "formats", FORMATS),
            (self.width_mm not in WIDTHS_MM, "width_mm", WIDTHS_MM),
            (self.plane not in PLANES, "plane", tuple(PLANES)),
            (self.mesh not in (None, *MESH_KINDS), "mesh", MESH_KINDS),
        ]
        for wrong, name, known in allowed:
            if wrong:
                raise MorphotoneError(
                    f"read {name} = {getattr(self, name)!r}, expected {' or '.join(map(str, known))}"
                )

    def to_dict(self) -> dict[str, Any]:
        """Return the request as JSON types."""
        return {
            "figure": list(self.formats),
            "width_mm": self.width_mm,
            "plane": self.plane,
            "shown_hz": self.hz,
            "colour": self.colour,
            "mesh": self.mesh,
        }


def places(name: str, request: MapRequest) -> dict[str, list[str]]:
    """Return the paths of a cell's files below the maps' folder, by column of ``maps.csv``.

    Parameters
    ----------
    name : str
        A safe relative path, as `morphotone.night.results.file_names` gives it.
    request : MapRequest
        What is asked.
    """
    return {
        "figure": [f"figures/{name}.{kind}" for kind in request.formats],
        "thumbnail": [f"thumbnails/{name}.png"],
        "mesh": [f"meshes/{name}.{request.mesh}"] if request.mesh else [],
        "colour_bar": [f"meshes/{name}.scale.png"] if request.mesh else [],
        "table": [f"samples/{name}.csv"],
    }


class Contents(NamedTuple):
    """What a cell's map comes to.

    Attributes
    ----------
    files : dict of str to list of bytes
        By column of ``maps.csv``, in the order of `places`.
    area : AreaCheck or None
        The mesh's area beside the cable's, where there is a mesh.
    """

    files: dict[str, list[bytes]]
    area: AreaCheck | None

    def areas(self) -> dict[str, str]:
        """Return what stands in the columns `AREAS`: numbers that read back equal, True or False."""
        if self.area is None:
            return dict.fromkeys(AREAS, "")
        return dict(zip(AREAS, map(str, (*self.area, self.area.agrees)), strict=True))


def contents(portrait: Portrait, file: str, request: MapRequest) -> Contents:
    """Return what a cell's files hold.

    Parameters
    ----------
    portrait : Portrait
        The cell; one that `check_drawable` lets through.
    file : str
        The name its table is led by.
    request : MapRequest
        What is asked.

    """
    figure = map_figure(portrait, request.width_mm, request.plane)
    files = {
        "figure": [figure_bytes(figure, kind) for kind in request.formats],
        "thumbnail": [figure_bytes(thumbnail(portrait, request.plane), "png", _THUMBNAIL_DPI)],
        "table": [_table(portrait, file)],
    }
    if request.mesh is None:
        return Contents(files, None)
    mesh = _mesh(portrait)
    files["mesh"] = [mesh_bytes(mesh, request.mesh)]
    files["colour_bar"] = [figure_bytes(colour_bar(portrait), "png")]
    return Contents(files, area_check(mesh, portrait.cell.cable))


def _mesh(portrait: Portrait) -> trimesh.Trimesh:
    """Return the membrane with the values that colour, named."""
    label = column_words(portrait.column)
    if is_logarithmic(portrait.column):
        label = f"natural logarithm of {label}"
    return membrane_mesh(portrait.cell.cable, portrait.values, label=label)


def _table(portrait: Portrait, file: str) -> bytes:
    """Return the table by sample as a survey writes it."""
    names = {"file": file, "cell": portrait.cell.rec.cell}
    (rows,) = csv_texts([portrait.table], [list(names.values())])
    return csv_line(*names, *portrait.table).encode() + rows
