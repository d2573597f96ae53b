"""The conformance kit: whether an element type may be trusted, in one call.

    assert_conforms(MyElement())

Each check is a generator of failures: sentences that say what was expected and what was found.
"""

from collections.abc import Callable, Iterator

import numpy as np

from elements.contract import Array, ElementType
from elements.errors import DegenerateElementError
from elements.manufactured import manufactured_errors
from elements.quadrature import line
from elements.registry import declaration_faults
from elements.trials import (
    curved_shapes,
    element_dofs,
    isotropic,
    patch_mesh,
    reference_rule,
    regular_shape,
    solve_dense,
    straight_shapes,
)

Failures = Iterator[str]

ROUNDING = 1e-10  # relative: exact identities, with room for a few hundred roundings
FINITE_DIFFERENCE = 1e-7  # central difference of step 1e-5: truncation and rounding near 1e-10
SOFTEST_MODE = 1e-4  # of the largest eigenvalue; sound elements stay above 1.5e-3 here
ORDER_SLACK = 0.25  # an observed order on coarse meshes is that far from its limit

# A law with stretch and shear coupled, so that no term may be forgotten. Positive definite.
COUPLED_LAW = np.array([[3.0, 0.8, 0.4], [0.8, 2.0, 0.3], [0.4, 0.3, 1.0]])


def assert_conforms(element: ElementType) -> None:
    """Raise AssertionError that lists every failure; return quietly when there is none."""
    failures = check(element)
    if failures:
        raise AssertionError("\n".join((f"{type(element).__name__} does not conform:", *failures)))


def check(element: ElementType) -> list[str]:
    """All failures of a type; empty when it conforms. Takes about a second."""
    failures = [f"declaration: {fault}" for fault in declaration_faults(element)]
    if failures:
        return failures  # every other check would stumble over them
    for one in CHECKS:
        name = one.__name__.replace("_", " ")
        try:
            failures += [f"{name}: {failure}" for failure in one(element)]
        except Exception as error:  # noqa: BLE001  whatever a stranger's class raises is a failure
            failures.append(f"{name}: raised {error!r}")
    return failures


def _differs(found: Array, expected: Array, tolerance: float = ROUNDING) -> str | None:
    """None when two arrays agree relative to the largest entry, else what differs."""
    found, expected = np.asarray(found), np.asarray(expected)
    if found.shape != expected.shape:
        return f"shape {found.shape} instead of {expected.shape}"
    scale = max(np.abs(expected).max(initial=0.0), 1e-30)
    error = np.abs(found - expected).max(initial=0.0) / scale
    return None if error <= tolerance else f"off by {error:.2g} of the largest value"


def _shapes(element: ElementType) -> dict[str, Array]:
    shapes = {"regular": regular_shape(element), "distorted": straight_shapes(element)}
    if element.order == 2:
        shapes["curved"] = curved_shapes(element)
    return shapes


def _points(element: ElementType) -> Array:
    """Natural points all over the element, none of them special."""
    return reference_rule(element).points * 0.93 + 0.01


def _laws(count: int) -> Array:
    """A different coupled law for each element."""
    return COUPLED_LAW * np.linspace(1, 2, count)[:, None, None]


def _fields(coords: Array) -> Array:
    """Displacement fields of the three constant strains at the nodes: (m, 2n, 3)."""
    x, y = coords[..., 0], coords[..., 1]
    zero = np.zeros_like(x)
    fields = [np.stack(pair, axis=-1) for pair in ((x, zero), (zero, y), (y / 2, x / 2))]
    return np.stack([field.reshape(len(coords), -1) for field in fields], axis=-1)


# --- shape functions -------------------------------------------------------------------------


def shape_functions_sum_to_one(element: ElementType) -> Failures:
    N = element.shape_functions(_points(element))
    if difference := _differs(N.sum(axis=-1), np.ones(len(N))):
        yield f"their sum is {difference}"


def shape_functions_are_one_at_their_own_node(element: ElementType) -> Failures:
    N = element.shape_functions(np.array(element.natural_nodes))
    if difference := _differs(N, np.eye(element.node_count)):
        yield f"against 1 at the own node and 0 at the others: {difference}"


def gradients_are_derivatives(element: ElementType) -> Failures:
    points, step = _points(element), 1e-5
    for axis in range(2):
        shift = step * np.eye(2)[axis]
        ahead = element.shape_functions(points + shift)
        slope = (ahead - element.shape_functions(points - shift)) / (2 * step)
        if difference := _differs(element.gradients(points)[:, axis], slope, FINITE_DIFFERENCE):
            yield f"natural coordinate {axis}, against central differences: {difference}"


def rules_fit_the_shape(element: ElementType) -> Failures:
    area = reference_rule(element).weights.sum()
    for name in ("stiffness_rule", "load_rule"):
        points, weights = getattr(element, name)()
        if _differs(weights.sum(), area):
            yield f"{name}: weights sum to {weights.sum():.6g}, the area is {area:.6g}"
        if not element.inside(points).all():
            yield f"{name}: a point is outside the element"
    if not element.inside(element.recovery_points()).all():
        yield "recovery_points: a point is outside the element"


# --- stiffness -------------------------------------------------------------------------------


def rigid_motions_cost_nothing(element: ElementType) -> Failures:
    for shape, coords in _shapes(element).items():
        K = element.stiffness(coords, _laws(len(coords)), np.ones(len(coords)))
        turn = np.stack((-coords[..., 1], coords[..., 0]), axis=-1)
        for name, motion in (("x", [1.0, 0.0]), ("y", [0.0, 1.0]), ("rotation", turn)):
            u = np.broadcast_to(motion, coords.shape).reshape(len(coords), -1, 1)
            force = np.abs(K @ u).max() / np.abs(K).max()
            if force > ROUNDING:
                yield f"{shape} elements resist rigid motion {name} ({force:.2g} of the stiffness)"


def exactly_three_zero_eigenvalues(element: ElementType) -> Failures:
    for shape, coords in _shapes(element).items():
        laws = np.tile(isotropic(1.0, 0.3), (len(coords), 1, 1))
        K = element.stiffness(coords, laws, np.ones(len(coords)))
        values = np.linalg.eigvalsh((K + K.transpose(0, 2, 1)) / 2)
        values /= values[:, -1:]
        zero = (values < SOFTEST_MODE).sum(axis=1)
        if (zero != 3).any():
            yield f"{shape} elements have up to {zero.max()} and down to {zero.min()}"
        if values.min() < -ROUNDING:
            yield f"{shape} elements have a negative eigenvalue, {values.min():.2g} of the largest"


def stiffness_is_symmetric(element: ElementType) -> Failures:
    for shape, coords in _shapes(element).items():
        K = element.stiffness(coords, _laws(len(coords)), np.ones(len(coords)))
        if difference := _differs(K, K.transpose(0, 2, 1)):
            yield f"{shape} elements: {difference}"


def stiffness_turns_with_the_element(element: ElementType) -> Failures:
    cosine, sine = 0.8, 0.6
    R = np.array([[cosine, -sine], [sine, cosine]])
    full = np.kron(np.eye(element.node_count), R)
    for shape, coords in _shapes(element).items():
        laws, t = np.tile(isotropic(1.0, 0.3), (len(coords), 1, 1)), np.ones(len(coords))
        turned = element.stiffness(coords @ R.T, laws, t)
        if difference := _differs(turned, full @ element.stiffness(coords, laws, t) @ full.T):
            yield f"{shape} elements: {difference}"


def elements_of_a_batch_are_independent(element: ElementType) -> Failures:
    coords = straight_shapes(element)
    laws, thickness = _laws(len(coords)), np.linspace(1, 3, len(coords))
    together = element.stiffness(coords, laws, thickness)
    alone = [
        t * element.stiffness(xy[None], D[None], np.ones(1))[0]
        for xy, D, t in zip(coords, laws, thickness, strict=True)
    ]
    if difference := _differs(together, np.array(alone)):
        yield f"a batch against one element at a time, thickness as a factor: {difference}"


def clockwise_elements_are_refused(element: ElementType) -> Failures:
    coords = regular_shape(element) * [1, -1]
    try:
        element.stiffness(coords, COUPLED_LAW[None], np.ones(1))
    except DegenerateElementError:
        return
    yield "no DegenerateElementError"


# --- constant strain -------------------------------------------------------------------------


def constant_strain_is_exact(element: ElementType) -> Failures:
    """Stress, energy and the load of an equal initial strain, in every shape."""
    for shape, coords in _shapes(element).items():
        laws, t = _laws(len(coords)), np.linspace(1, 2, len(coords))
        fields, points = _fields(coords), element.recovery_points()
        stress = element.stress_operator(coords, laws, points) @ fields[:, None]
        if difference := _differs(stress, np.broadcast_to(laws[:, None], stress.shape)):
            yield f"stress in {shape} elements: {difference}"
        forces = element.stiffness(coords, laws, t) @ fields
        rule = reference_rule(element)
        area = element.jacobian(coords, rule.points)[1] @ rule.weights
        energy = fields.transpose(0, 2, 1) @ forces
        if difference := _differs(energy, laws * (area * t)[:, None, None]):
            yield f"strain energy of {shape} elements: {difference}"
        for component in range(3):
            strain = np.zeros((len(coords), len(element.stiffness_rule().weights), 3))
            strain[..., component] = 1.0
            load = element.initial_strain_load(coords, laws, t, strain)
            expected = forces[..., component].reshape(load.shape)
            if difference := _differs(load, expected):
                yield f"load of an initial strain, {shape} elements: {difference}"


def patch_test(element: ElementType) -> Failures:
    """MacNeal & Harder 1985: constant stress in an irregular patch, from the border alone."""
    mesh, law = patch_mesh(element), isotropic(1e6, 0.25)
    x, y = mesh.nodes.T
    exact = 1e-3 * np.column_stack((x + y / 2, y + x / 2))
    u = solve_dense(element, mesh, law, np.zeros(mesh.coords.shape), exact)
    if difference := _differs(u, exact):
        yield f"displacement of the inner nodes: {difference}"
    laws = np.tile(law, (len(mesh.connectivity), 1, 1))
    operator = element.stress_operator(mesh.coords, laws, element.recovery_points())
    stress = np.einsum("mqia,ma->mqi", operator, u.ravel()[element_dofs(mesh.connectivity)])
    # 1e6/(1 - 0.25^2) (1 + 0.25) 1e-3 = 4000/3 and 1e6/(2 (1 + 0.25)) 1e-3 = 400.
    if difference := _differs(stress, np.broadcast_to([4000 / 3, 4000 / 3, 400], stress.shape)):
        yield f"stress against (1333.33, 1333.33, 400): {difference}"


# --- loads -----------------------------------------------------------------------------------


def side_loads_do_the_right_work(element: ElementType) -> Failures:
    """A linear traction on a straight side against linear displacements, by a 5-point rule."""
    coords = straight_shapes(element)
    linear = np.array([[0.3, -0.2], [0.5, 0.7]])
    s, weights = line(5)
    for side, ends in enumerate(element.sides):
        start, end = coords[:, ends[0], None], coords[:, ends[1], None]
        position, _ = element.side_points(coords, side)
        load = element.side_load(coords, side, position @ linear + [1.0, 2.0])
        work = np.einsum("mni,mnj->mij", load, coords)
        x = (start * (1 - s[:, None]) + end * (1 + s[:, None])) / 2
        length = np.linalg.norm(end - start, axis=-1) / 2 * weights
        expected = np.einsum("mq,mqi,mqj->mij", length, x @ linear + [1.0, 2.0], x)
        force = np.einsum("mq,mqi->mi", length, x @ linear + [1.0, 2.0])
        if difference := _differs(load.sum(axis=1), force):
            yield f"resultant on side {side}: {difference}"
        if difference := _differs(work, expected):
            yield f"first moments on side {side}: {difference}"


def tension_all_round_balances(element: ElementType) -> Failures:
    """Unit tension on every side: no resultant, no moment, and virial 2 x area, curved or not."""
    rule = reference_rule(element)
    for shape, coords in _shapes(element).items():
        total = np.zeros_like(coords)
        for side in range(len(element.sides)):
            _, tangent = element.side_points(coords, side)
            normal = np.stack((tangent[..., 1], -tangent[..., 0]), axis=-1)
            normal /= np.linalg.norm(normal, axis=-1, keepdims=True)
            total += element.side_load(coords, side, normal)
        virial = np.einsum("mni,mnj->mij", total, coords)
        area = element.jacobian(coords, rule.points)[1] @ rule.weights
        if difference := _differs(virial, area[:, None, None] * np.eye(2)):
            yield f"first moments of {shape} elements: {difference}"
        if np.abs(total.sum(axis=1)).max() > ROUNDING * np.abs(total).max():
            yield f"{shape} elements have a resultant"


def body_loads_do_the_right_work(element: ElementType) -> Failures:
    """A linear force per volume against linear displacements, by a rich rule."""
    coords, rule = straight_shapes(element), reference_rule(element)
    t = np.linspace(1, 2, len(coords))
    linear = np.array([[0.3, -0.2], [0.5, 0.7]])
    x = element.shape_functions(element.load_rule().points) @ coords
    load = element.body_load(coords, t, x @ linear + [1.0, 2.0])
    x = element.shape_functions(rule.points) @ coords
    volume = element.jacobian(coords, rule.points)[1] * rule.weights * t[:, None]
    force = x @ linear + [1.0, 2.0]
    if difference := _differs(load.sum(axis=1), np.einsum("mq,mqi->mi", volume, force)):
        yield f"resultant: {difference}"
    work = np.einsum("mni,mnj->mij", load, coords)
    if difference := _differs(work, np.einsum("mq,mqi,mqj->mij", volume, force, x)):
        yield f"first moments: {difference}"


# --- the inverse map, convergence ------------------------------------------------------------


def natural_coordinates_are_found(element: ElementType) -> Failures:
    for shape, coords in _shapes(element).items():
        for point in _points(element):
            xy = (element.shape_functions(point[None]) @ coords)[:, 0]
            natural, converged = element.natural_coordinates(coords, xy)
            if not converged.all() or np.abs(natural - point).max() > 1e-8:
                yield f"{shape} elements: natural point {point} is not found again"
                break


def errors_fall_at_the_right_order(element: ElementType) -> Failures:
    """Displacement (L2) at order + 1, energy norm at order; method of manufactured solutions."""
    coarse = 6 if element.order == 1 else 4
    rough, fine = (manufactured_errors(element, n) for n in (coarse, 2 * coarse))
    for name, before, after, order in zip(
        ("displacement", "energy norm"),
        rough,
        fine,
        (element.order + 1, element.order),
        strict=True,
    ):
        observed = float(np.log2(before / after))
        if not observed >= order - ORDER_SLACK:
            yield f"{name}: observed order {observed:.2f} instead of {order}"


CHECKS: tuple[Callable[[ElementType], Failures], ...] = (
    shape_functions_sum_to_one,
    shape_functions_are_one_at_their_own_node,
    gradients_are_derivatives,
    rules_fit_the_shape,
    rigid_motions_cost_nothing,
    exactly_three_zero_eigenvalues,
    stiffness_is_symmetric,
    stiffness_turns_with_the_element,
    elements_of_a_batch_are_independent,
    clockwise_elements_are_refused,
    constant_strain_is_exact,
    patch_test,
    side_loads_do_the_right_work,
    tension_all_round_balances,
    body_loads_do_the_right_work,
    natural_coordinates_are_found,
    errors_fall_at_the_right_order,
)
