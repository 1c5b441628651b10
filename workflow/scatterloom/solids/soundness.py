"""Whether a surface of triangles encloses a body: closed, turned the right way, not crossing."""

from __future__ import annotations

import numpy as np

from scatterloom.solids.adjacency import edges_of, parts
from scatterloom.solids.crossing import first_crossing
from scatterloom.solids.mesh import Mesh

_NO_REPAIR = (
    "repair it in the program that made it: closing or turning it here would make up a surface"
)


def check_closed_body(mesh: Mesh) -> int:
    """Check that a surface encloses a body, and count the parts of the body.

    Returns
    -------
    int
        Separate parts, hollows not counted.

    Raises
    ------
    ValueError
        With what is wrong, where, and what would be right.
    """
    edges = edges_of(mesh.triangles)
    open_ = np.flatnonzero(edges.forth + edges.back < 2)
    if open_.size:
        raise ValueError(
            f"the surface is not closed: {open_.size} of its edges belong to one triangle only, "
            f"the first one {_between(mesh, edges.ends[open_[0]])}; {_NO_REPAIR}"
        )
    odd = np.flatnonzero(edges.forth != edges.back)
    if odd.size:
        raise ValueError(
            f"the triangles are not turned alike: at {odd.size} edges two neighbours disagree on "
            f"what is outside, the first one {_between(mesh, edges.ends[odd[0]])}; {_NO_REPAIR}"
        )
    if not mesh.volume > 0.0:
        raise ValueError(
            f"the surface encloses the volume {mesh.volume:.6g}: corners must run counterclockwise "
            "seen from outside; turn all triangles over"
        )
    crossing = first_crossing(mesh)
    if crossing is not None:
        places = [_shown(mesh.corners[mesh.triangles[t]].mean(axis=0)) for t in crossing]
        raise ValueError(
            f"the surface crosses itself: triangle {crossing[0]} at {places[0]} and triangle "
            f"{crossing[1]} at {places[1]}; unite or part the pieces in the program that made it"
        )
    return _check_nesting(mesh)


def _check_nesting(mesh: Mesh) -> int:
    """Check that bodies lie side by side and hollows within bodies; return the bodies."""
    label = parts(mesh)
    count = int(label.max()) + 1
    pieces = [Mesh(mesh.corners, mesh.triangles[label == p], mesh.piece[label == p])
              for p in range(count)]  # fmt: skip
    solid = [piece.volume > 0.0 for piece in pieces]
    for number, piece in enumerate(pieces):
        others = Mesh(mesh.corners, mesh.triangles[label != number], mesh.piece[label != number])
        around = winding(others, _just_inside(piece))
        expected = 0 if solid[number] else 1
        if round(around) != expected:
            place = _shown(piece.corners[piece.triangles[0, 0]])
            raise ValueError(
                f"the part at {place} lies within another one and would count twice: unite them"
                if solid[number]
                else f"the part at {place} is turned inside out and lies within no other one: "
                "turn its triangles over"
            )
    return sum(solid)


def _just_inside(piece: Mesh) -> np.ndarray:
    """A point in the material just below the largest triangle, so that parts may touch."""
    vectors = piece.area_vectors
    sizes = np.linalg.norm(vectors, axis=1)
    largest = int(sizes.argmax())
    depth = 1e-6 * np.sqrt(sizes[largest])
    middle = piece.corners[piece.triangles[largest]].mean(axis=0)
    return middle - depth * vectors[largest] / sizes[largest]


def winding(mesh: Mesh, point: np.ndarray) -> float:
    """How often a closed surface goes around a point: solid angle over 4 pi.

    Solid angles of triangles after van Oosterom & Strackee (1983), IEEE Trans. Biomed. Eng. 30,
    125 (from memory).
    """
    a, b, c = (mesh.corners[mesh.triangles[:, i]] - point for i in range(3))
    la, lb, lc = (np.linalg.norm(side, axis=1) for side in (a, b, c))
    above = np.einsum("ij,ij->i", a, np.cross(b, c))
    below = la * lb * lc + lc * np.sum(a * b, 1) + la * np.sum(b * c, 1) + lb * np.sum(c * a, 1)
    return float(np.sum(np.arctan2(above, below))) / (2.0 * np.pi)


def _between(mesh: Mesh, ends: np.ndarray) -> str:
    return f"from {_shown(mesh.corners[ends[0]])} to {_shown(mesh.corners[ends[1]])}"


def _shown(place: np.ndarray) -> str:
    return "(" + ", ".join(f"{value:.4g}" for value in place) + ")"
