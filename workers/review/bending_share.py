"""How much of what low-order elements carry is bending that they cannot show.

An element with linear displacements has a constant stress (T3), or nearly so (Q4). Where the true
stress varies linearly across n elements, a part near 1/n^2 of the strain energy lies in that
variation. T3 shows it as jumps between neighbours, Q4 as strain that differs between the
integration points and the centre (the bending modes, which Q4 resists too stiffly). Displacements
come out too small by a fraction of the same order.
"""

import numpy as np
from numpy.typing import NDArray

from elements.contract import strain_matrix
from workers.analysis.plane_stress import constitutive
from workers.review.context import ReviewContext

Array = NDArray[np.float64]

SAMPLE = 20_000  # elements or facets looked at, evenly spread: a share needs no more


def bending_shares(context: ReviewContext, state: str) -> dict[str, float]:
    """Share of the strain energy, for T3 and Q4 if the mesh has them; empty without a solution."""
    u = context.displacement(state)
    if u is None:
        return {}
    shares: dict[str, float] = {}
    free = context.free_strain(state)
    for number, block in enumerate(context.mesh.blocks):
        if block.element.name == "Q4":
            shares["Q4"] = max(shares.get("Q4", 0.0), _within(context, number, u, free[number]))
        if block.element.name == "T3":
            shares["T3"] = max(
                shares.get("T3", 0.0), _between(context, number, state, free[number])
            )
    return shares


def _law(context: ReviewContext, regions: NDArray[np.int32]) -> Array:
    """Thickness times plane-stress law of elements by region number, (m, 3, 3) [F/L]."""
    job = context.job
    laws = []
    for name in context.mesh.regions:
        material = job.material_of(name)
        law = constitutive(material.youngs_modulus, material.poissons_ratio)
        laws.append(job.thickness_of(name) * law)
    return np.array(laws)[regions]


def _within(context: ReviewContext, number: int, u: Array, free: Array) -> float:
    """Energy of the strain's departure from that of the element's centre."""
    block = context.mesh.blocks[number]
    chosen = slice(None, None, len(block.connectivity) // SAMPLE + 1)
    connectivity = block.connectivity[chosen]
    coords, moved = context.mesh.nodes[connectivity], u[connectivity].reshape(len(connectivity), -1)
    law = _law(context, block.region[chosen])
    points, weights = block.element.stiffness_rule()
    G, det_J = block.element.cartesian_gradients(coords, points)
    strain = np.einsum("mqia,ma->mqi", strain_matrix(G), moved)
    strain[..., :2] -= free[chosen, None, None]
    area = det_J * weights
    mean = np.einsum("mq,mqi->mi", area, strain) / area.sum(axis=1, keepdims=True)
    total = np.einsum("mq,mqi,mij,mqj->", area, strain, law, strain, optimize=True)
    uniform = np.einsum("m,mi,mij,mj->", area.sum(axis=1), mean, law, mean, optimize=True)
    return float(1 - uniform / total) if total > 0 else 0.0


def _between(context: ReviewContext, number: int, state: str, free: Array) -> float:
    """Energy of the strain's departure from the mean of two neighbours in one region."""
    block = context.mesh.blocks[number]
    one, other = context.mesh.shared_facets()
    same = (one[:, 0] == number) & (other[:, 0] == number)
    first, second = one[same, 1], other[same, 1]
    same = block.region[first] == block.region[second]
    step = int(same.sum()) // SAMPLE + 1
    first, second = first[same][::step], second[same][::step]
    H = context.displacement_gradients(state)[number]
    normal = H[:, [0, 1], [0, 1]] - free[:, None]
    strain = np.column_stack((normal, H[:, 0, 1] + H[:, 1, 0]))
    coords = context.mesh.coords(number)
    edges = coords[:, 1:] - coords[:, :1]
    area = (edges[:, 0, 0] * edges[:, 1, 1] - edges[:, 0, 1] * edges[:, 1, 0]) / 2
    weighted = (area[first] + area[second])[:, None, None] * _law(context, block.region[first])

    def energy(of: Array) -> float:
        return float(np.einsum("mi,mij,mj->", of, weighted, of, optimize=True))

    uniform = energy((strain[first] + strain[second]) / 2)
    varying = energy((strain[first] - strain[second]) / 2)
    return varying / (uniform + varying) if varying > 0 else 0.0
