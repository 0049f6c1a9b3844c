"""Absorption distance against tabulated numbers.

Definition: Bahcall & Peebles 1969, ApJ 156, L7. The table is *derived*: computed from the closed
form X = (2/3 Om0) [E(z) - 1] for flat space, apart from this package, and written to four decimals;
the tolerance is half the last digit.
"""

import numpy as np
from numpy.testing import assert_allclose

from fogline.cosmology import Cosmology

# z, dX/dz, X for flat space with Om0 = 0.3; status: derived.
TABLE = np.array(
    [
        [2.0, 3.0339, 4.3700],
        [2.5, 3.3263, 5.9616],
        [3.0, 3.5867, 7.6910],
        [4.0, 4.0449, 11.5125],
    ]
)


def test_table_of_flat_space():
    z, per_redshift, path = TABLE.T
    cosmology = Cosmology(70.0, 0.3)
    assert_allclose(cosmology.dx_dz(z), per_redshift, rtol=0.0, atol=5.1e-5)
    assert_allclose(cosmology.absorption_distance(z), path, rtol=0.0, atol=5.1e-5)


def test_absorption_distance_does_not_depend_on_the_hubble_constant():
    z = TABLE[:, 0]
    assert_allclose(
        Cosmology(50.0, 0.3).absorption_distance(z),
        Cosmology(72.0, 0.3).absorption_distance(z),
        rtol=1e-13,
    )
