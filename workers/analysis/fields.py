"""The fields of one state, ready to be written or drawn.

Everything is formed from stored displacements alone, so that any state can be written long after
the solution. Von Mises and principal stresses are formed after superposition.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Fields:
    """Fields of one state on the P points of a `FieldMesh`, and per element.

    name : str                      of the load case or combination
    displacement : (P, 2) array     [L]
    stress : (P, 3) array           recovered: xx, yy, xy [F/L^2]
    von_mises, principal_max, principal_min : (P,) arrays   [F/L^2]
    shear_max : (P,) array          largest shear on any plane, out-of-plane ones included [F/L^2]
    thickness_strain : (P,) array   -nu (xx + yy) / E + alpha dT
    cell_stress : tuple of (m, 3)   per block: the element's own stress at its centre [F/L^2]
    cell_error : tuple of (m,)      per block: estimated error as an equivalent stress,
                                    sqrt(E e^2 / V) with the energy norm e and volume V [F/L^2]
    """

    name: str
    displacement: Array
    stress: Array
    von_mises: Array
    principal_max: Array
    principal_min: Array
    shear_max: Array
    thickness_strain: Array
    cell_stress: tuple[Array, ...]
    cell_error: tuple[Array, ...]
