"""The patch test across element types that share sides."""

import numpy as np
import pytest

from elements import registry
from elements.trials import PATCH_CORNERS, PATCH_QUADRILATERALS, element_dofs, isotropic


def split_patch(order: int) -> tuple[np.ndarray, dict[str, np.ndarray]]:
    """The patch with its last two quadrilaterals cut into triangles; nodes and connectivity."""
    quads, cut = PATCH_QUADRILATERALS[:3], PATCH_QUADRILATERALS[3:]
    corners = {"Q4": quads, "T3": np.vstack((cut[:, [0, 1, 2]], cut[:, [0, 2, 3]]))}
    if order == 1:
        return PATCH_CORNERS, corners
    nodes, mids, blocks = [*PATCH_CORNERS], {}, {}
    for name, connectivity in (("Q8", corners["Q4"]), ("T6", corners["T3"])):
        rows = []
        for row in connectivity:
            ends = list(zip(row, np.roll(row, -1), strict=True))
            for a, b in ends:
                if (key := frozenset((a, b))) not in mids:
                    mids[key] = len(nodes)
                    nodes.append((PATCH_CORNERS[a] + PATCH_CORNERS[b]) / 2)
            rows.append([*row, *(mids[frozenset(end)] for end in ends)])
        blocks[name] = np.array(rows)
    return np.array(nodes), blocks


@pytest.mark.parametrize("order", [1, 2])
def test_mixed_patch_carries_constant_stress_exactly(order: int) -> None:
    """MacNeal & Harder 1985 (geometry from memory): u = 1e-3 (x + y/2), v = 1e-3 (y + x/2) on the
    border gives 4000/3, 4000/3, 400 everywhere, by Hooke's law with E = 1e6 and nu = 0.25."""
    nodes, blocks = split_patch(order)
    law, K = isotropic(1e6, 0.25), np.zeros((nodes.size, nodes.size))
    for name, connectivity in blocks.items():
        dofs, count = element_dofs(connectivity), len(connectivity)
        stiffness = registry.get(name).stiffness(
            nodes[connectivity], np.tile(law, (count, 1, 1)), np.full(count, 0.001)
        )
        np.add.at(K, (dofs[:, :, None], dofs[:, None, :]), stiffness)
    x, y = nodes.T
    exact = (1e-3 * np.column_stack((x + y / 2, y + x / 2))).ravel()
    on_border = (x == 0) | (x == 0.24) | (y == 0) | (y == 0.12)
    free = np.repeat(~on_border, 2)
    u = np.where(free, 0.0, exact)
    u[free] = np.linalg.solve(K[np.ix_(free, free)], -(K @ u)[free])
    np.testing.assert_allclose(u, exact, atol=1e-16)
    for name, connectivity in blocks.items():
        element, laws = registry.get(name), np.tile(law, (len(connectivity), 1, 1))
        operator = element.stress_operator(
            nodes[connectivity], laws, element.stiffness_rule().points
        )
        stress = np.einsum("mqia,ma->mqi", operator, u[element_dofs(connectivity)])
        expected = np.broadcast_to([4000 / 3, 4000 / 3, 400], stress.shape)
        np.testing.assert_allclose(stress, expected, rtol=1e-11)
