"""What `scatterloom preview` draws: the particles of a planned campaign."""

from __future__ import annotations

from scatterloom.campaign.bodies import body
from scatterloom.campaign.case import canonical_json
from scatterloom.figures.bodies import Body
from scatterloom.graph import Graph


def bodies_of(graph: Graph) -> list[Body]:
    """The particles in the order of the campaign, each with its finest planned lattice."""
    across: dict[str, int] = {}
    for job in graph.jobs.values():
        key = canonical_json(dict(job.shape))
        across[key] = max(across.get(key, 0), *job.levels)
    radii = graph.grid.radius_um
    found = []
    for place, particle in enumerate(graph.campaign.model.particles):
        # As solved: a coating of the core's index is none.
        case = graph.grid.cases[int(graph.grid.where[place, 0, -1])]
        spec, kept = body(particle, case.indices if len(case.indices) > 1 else None)
        solved = canonical_json(dict(case.shape))
        materials = tuple(particle.materials[number] for number in kept)
        cells = across.get(canonical_json(spec), across[solved])
        size = (float(radii.min()), float(radii.max()))
        found.append(Body(particle.name, spec, materials, cells, size))
    return found
