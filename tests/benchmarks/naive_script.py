"""What an engineer would write in an afternoon: loops over elements, triplets, spsolve per case.

Eight-node quadrilaterals, 3x3 Gauss points, stresses at the nodes averaged. Correct, and slow.
"""

import numpy as np
from scipy.sparse import coo_matrix
from scipy.sparse.linalg import spsolve

A = 0.6**0.5
GAUSS = [(x, y, wx * wy) for x, wx in ((-A, 5 / 9), (0, 8 / 9), (A, 5 / 9))
         for y, wy in ((-A, 5 / 9), (0, 8 / 9), (A, 5 / 9))]  # fmt: skip
NODES = [(-1, -1), (1, -1), (1, 1), (-1, 1), (0, -1), (1, 0), (0, 1), (-1, 0)]


def gradients(x, y):
    """Derivatives of the eight shape functions by x and y, (2, 8)."""
    d = np.zeros((2, 8))
    for k, (a, b) in enumerate(NODES):
        if a and b:
            d[0, k] = a * (1 + b * y) * (2 * a * x + b * y) / 4
            d[1, k] = b * (1 + a * x) * (2 * b * y + a * x) / 4
        elif b:
            d[:, k] = -x * (1 + b * y), b * (1 - x * x) / 2
        else:
            d[:, k] = a * (1 - y * y) / 2, -y * (1 + a * x)
    return d


def strain_matrix(xy, x, y):
    d = gradients(x, y)
    J = d @ xy
    g = np.linalg.solve(J, d)
    B = np.zeros((3, 16))
    B[0, 0::2], B[1, 1::2] = g
    B[2, 0::2], B[2, 1::2] = g[1], g[0]
    return B, np.linalg.det(J)


def elasticity(E, nu):
    return E / (1 - nu * nu) * np.array([[1, nu, 0], [nu, 1, 0], [0, 0, (1 - nu) / 2]])


def assemble(nodes, elements, D, t):
    rows, columns, values = [], [], []
    for element in elements:
        k = np.zeros((16, 16))
        for x, y, w in GAUSS:
            B, det = strain_matrix(nodes[element], x, y)
            k += B.T @ D @ B * det * w * t
        dofs = [2 * n + i for n in element for i in (0, 1)]
        for i in range(16):
            for j in range(16):
                rows.append(dofs[i])
                columns.append(dofs[j])
                values.append(k[i, j])
    size = 2 * len(nodes)
    return coo_matrix((values, (rows, columns)), shape=(size, size)).tocsr()


def solve_case(K, load, fixed):
    free = np.setdiff1d(np.arange(K.shape[0]), fixed)
    u = np.zeros(K.shape[0])
    u[free] = spsolve(K[free][:, free].tocsc(), load[free])
    return u


def nodal_stress(nodes, elements, D, u):
    stress, count = np.zeros((len(nodes), 3)), np.zeros(len(nodes))
    for element in elements:
        dofs = [2 * n + i for n in element for i in (0, 1)]
        for n, (x, y) in zip(element, NODES, strict=True):
            B, _ = strain_matrix(nodes[element], x, y)
            stress[n] += D @ B @ u[dofs]
            count[n] += 1
    return stress / count[:, None]
