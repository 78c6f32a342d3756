"""The membrane of a cell as a coloured mesh, in µm, that carries the value itself at every vertex."""

from collections.abc import Callable
from typing import Any, Literal, NamedTuple, cast

import numpy as np
import trimesh
from numpy.typing import NDArray
from trimesh.exchange import gltf, obj, ply
from trimesh.visual import ColorVisuals

from morphotone.cable.tree import Cable
from morphotone.errors import ReadingError
from morphotone.showing.colours import scale_of
from morphotone.showing.placed import frusta_of
from morphotone.showing.tubes import CABLE, SOMA, Surface, sides, tubes

Real = NDArray[np.float64]
MeshKind = Literal["glb", "ply", "obj"]

MESH_KINDS: tuple[MeshKind, ...] = ("glb", "ply", "obj")

# What bends and tapers together may change, as a share of a cell's area; see `AreaCheck`.
BEND_ERROR = 0.005
_UNIT = "micrometers"  # as trimesh spells µm
_FLOAT32 = np.finfo(np.float32)


class AreaCheck(NamedTuple):
    """The cable's membrane as drawn, beside the cable's own.

    Attributes
    ----------
    mesh_um2 : float
        Area of the faces that stand for the cable's membrane, µm2.
    cable_um2 : float
        The sum of `Cable.areas`, µm2.
    facet_error : float
        The share by which flat sides make straight frusta too small, known from their number: 0 for
        cylinders, at most 1 − (π/n)/tan(π/n) for n sides.
    """

    mesh_um2: float
    cable_um2: float
    facet_error: float

    @property
    def agrees(self) -> bool:
        """Whether the two agree but for the facet error, to `BEND_ERROR` of the area."""
        expected = self.cable_um2 * (1.0 - self.facet_error)
        return bool(abs(self.mesh_um2 - expected) <= BEND_ERROR * self.cable_um2)


def membrane_mesh(
    cable: Cable, by_node: Real, *, rgba: NDArray[np.uint8] | None = None, label: str = "value"
) -> trimesh.Trimesh:
    """Return the membrane of a cell as a mesh: tubes of its frusta, a ball or chain for its soma.

    Parameters
    ----------
    cable : Cable
        As analysed: what the assumptions leave out is not drawn.
    by_node : ndarray, shape (nodes,)
        The value at each node; NaN where there is none. Between nodes a viewer interpolates.
    rgba : ndarray of uint8, shape (nodes, 4), optional
        Colours; those of `morphotone.showing.colours` from the least to the greatest value unless given.
    label : str, optional
        The quantity with its unit, for the head of a file.

    Returns
    -------
    trimesh.Trimesh
        Right-handed, in µm and in the coordinates of the file (after its corrections), faces
        counter-clockwise from outside. One closed body per tube and one for a round soma (see
        `morphotone.showing.tubes`). ``vertex_attributes["value"]`` holds the values, float64,
        ``face_attributes["part"]`` tells the cable's membrane (1), the soma's (2) and ends (0).

    Raises
    ------
    ReadingError
        When all samples lie in one place and there is no soma (reason ``nothing_to_draw``).

    Notes
    -----
    The membrane's area as drawn is that of the cable, but for the facet error of tapers (`area_check`); a
    round soma has its rule's area.
    """
    surfaces, straight = _surfaces(cable)
    first = np.cumsum([0, *(len(surface.vertices) for surface in surfaces)])
    node = np.concatenate([surface.node for surface in surfaces])
    colours = scale_of(by_node, label).rgba(by_node) if rgba is None else rgba
    mesh = trimesh.Trimesh(
        vertices=np.concatenate([surface.vertices for surface in surfaces]),
        faces=np.concatenate([s.faces + at for s, at in zip(surfaces, first, strict=False)]),
        vertex_normals=np.concatenate([surface.normals for surface in surfaces]),
        vertex_colors=colours[node],
        face_attributes={"part": np.concatenate([surface.part for surface in surfaces]).astype(np.uint8)},
        vertex_attributes={"value": np.asarray(by_node, np.float64)[node]},
        metadata={"value": label, "straight_um2": straight},
        process=False,
    )
    mesh.units = _UNIT
    return mesh


def _surfaces(cable: Cable) -> tuple[list[Surface], float]:
    """Return the surfaces of a cell, and the area its cable would have if no frustum bent, µm2."""
    frusta, soma = frusta_of(cable), cable.traced.soma
    surfaces, straight = [], 0.0
    if len(soma.members) and soma.rule != "chain":
        surfaces.append(_ball(soma.centre, soma.radius))
    if len(frusta):
        surface, areas = tubes(frusta)
        surfaces.append(surface)
        straight = float(areas[frusta.part == CABLE].sum())
    if not surfaces:
        raise ReadingError(
            "read samples in one place and no soma, expected cable of some length or a soma to draw; "
            "leave the file out",
            "nothing_to_draw",
        )
    return surfaces, straight


def _ball(centre: Real, radius: float) -> Surface:
    """Return a soma as a ball of triangles with the area of the sphere of a radius."""
    around = int(sides(np.array(radius)))
    halvings = int(np.ceil(np.log2(around / 5)))  # an icosahedron is five sides around
    ball = trimesh.creation.icosphere(subdivisions=halvings)
    out = np.asarray(ball.vertices)
    return Surface(
        centre + out * radius * np.sqrt(4 * np.pi / ball.area),
        out,
        np.zeros(len(out), np.int64),
        np.asarray(ball.faces),
        np.full(len(ball.faces), SOMA),
    )


def area_check(mesh: trimesh.Trimesh, cable: Cable) -> AreaCheck:
    """Return the cable's membrane in a mesh of `membrane_mesh` beside the cable's own."""
    drawn = float(mesh.area_faces[mesh.face_attributes["part"] == CABLE].sum())
    true = float(sum(part.sum() for part in cable.areas()))
    return AreaCheck(drawn, true, 1.0 - mesh.metadata["straight_um2"] / true if true else 0.0)


def mesh_bytes(mesh: trimesh.Trimesh, kind: MeshKind) -> bytes:
    """Return a mesh of `membrane_mesh` as the bytes of a file, the same every time.

    Parameters
    ----------
    mesh : trimesh.Trimesh
    kind : {"glb", "ply", "obj"}
        GLB (glTF 2.0): the value is the vertex attribute ``_VALUE`` in single precision, -3.4028235e+38 where
        there is none, since glTF has no NaN; its name and the unit µm stand in the extras. PLY: the value is
        the vertex property ``value`` in double precision, its name a comment; ``part`` is a property of
        faces. OBJ: vertex colours only; for the value it has no place. Positions are in single precision in
        GLB and PLY.
    """
    return _WRITERS[kind](mesh)


def _glb(mesh: trimesh.Trimesh) -> bytes:
    """Return a binary glTF 2.0; its vertex colours are linear light, as its specification says (3.7.2.1)."""
    value = np.clip(mesh.vertex_attributes["value"], _FLOAT32.min, _FLOAT32.max)
    shown = trimesh.Trimesh(
        vertices=mesh.vertices,
        faces=mesh.faces,
        vertex_normals=mesh.vertex_normals,
        vertex_colors=_linear_light(cast(ColorVisuals, mesh.visual).vertex_colors),
        vertex_attributes={"_VALUE": np.where(np.isnan(value), _FLOAT32.min, value).astype(np.float32)},
        metadata={"value": mesh.metadata["value"], "no_value": float(_FLOAT32.min), "units": _UNIT},
        process=False,
    )
    scene = trimesh.Scene()
    scene.add_geometry(shown, node_name="membrane", geom_name="membrane")
    data: bytes = gltf.export_glb(scene, include_normals=True, tree_postprocessor=_make_matt)  # type: ignore[no-untyped-call]
    return data


def _make_matt(tree: dict[str, Any]) -> None:
    """Give a glTF tree's mesh a surface that shows its colours; without one it counts as polished metal."""
    tree["materials"] = [{"pbrMetallicRoughness": {"metallicFactor": 0.0, "roughnessFactor": 1.0}}]
    tree["meshes"][0]["primitives"][0]["material"] = 0


def _linear_light(rgba: NDArray[np.uint8]) -> NDArray[np.uint8]:
    """Return colours of a screen as linear light (IEC 61966-2-1); the fourth column stays."""
    shade = np.arange(256) / 255.0
    linear = np.where(shade <= 0.04045, shade / 12.92, ((shade + 0.055) / 1.055) ** 2.4)
    bright = np.round(255.0 * linear).astype(np.uint8)
    return np.column_stack((bright[rgba[:, :3]], rgba[:, 3]))


def _ply(mesh: trimesh.Trimesh) -> bytes:
    data = ply.export_ply(mesh, vertex_normal=True)
    comment = f"\ncomment unit um\ncomment value is {_one_line(mesh)}".encode()
    return bytes(data.replace(b"\nelement vertex", comment + b"\nelement vertex", 1))


def _obj(mesh: trimesh.Trimesh) -> bytes:
    header = f"unit um; colours show {_one_line(mesh)}"
    text: str = obj.export_obj(mesh, include_normals=True, header=header)  # type: ignore[no-untyped-call]
    return text.encode()


def _one_line(mesh: trimesh.Trimesh) -> str:
    """Return what the values are, without line breaks."""
    return " ".join(str(mesh.metadata["value"]).split())


_WRITERS: dict[str, Callable[[trimesh.Trimesh], bytes]] = {"glb": _glb, "ply": _ply, "obj": _obj}
