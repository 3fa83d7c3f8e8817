"""Published worked examples of the figures used for zones."""

from __future__ import annotations

import numpy as np
import pytest

from schorl.zoning.clusters import fuzzy_c_means
from schorl.zoning.indices import (
    fuzziness_performance,
    modified_entropy,
    normalised_entropy,
    partition_coefficient,
    partition_entropy,
)
from schorl.zoning.matching import adjusted_rand, kappa

#: Bezdek's butterfly, 15 points symmetric about (3, 2) (Bezdek 1981, Pattern Recognition with
#: Fuzzy Objective Function Algorithms).
BUTTERFLY = np.array(
    [
        (0, 0), (0, 2), (0, 4), (1, 1), (1, 2), (1, 3), (2, 2), (3, 2), (4, 2),
        (5, 1), (5, 2), (5, 3), (6, 0), (6, 2), (6, 4),
    ],
    dtype=float,
)  # fmt: skip
START = np.array([[1.0, 1.9], [5.0, 2.1]])


def test_butterfly_at_m_2():
    """Centres (0.854773, 2) and (5.145227, 2), the middle point half in each.

    Computed with e1071 1.7-13 of R 4.2.2 and again with numpy; the symmetry of the points fixes
    the middle one at 0.5 and the sum of the centres at 6 whatever the program.
    """
    found = fuzzy_c_means(BUTTERFLY, START, fuzziness=2.0, tolerance=1e-12)
    assert np.allclose(found.centres, [[0.854772590339, 2.0], [5.145227409661, 2.0]], atol=1e-8)
    assert found.memberships[7] == pytest.approx([0.5, 0.5], abs=1e-9)
    assert found.memberships[0, 0] == pytest.approx(0.86562220175501, abs=1e-8)
    assert found.memberships[1, 0] == pytest.approx(0.97314232661146, abs=1e-8)


@pytest.mark.parametrize(
    ("fuzziness", "west", "figures"),
    [
        (1.25, 0.844032381868, (0.966274665895, 0.0479080456396, 0.0674506682104, 0.0552785141995, 0.0691166998629)),
        (1.50, 0.833650433805, (0.948174500514, 0.0937276206345, 0.1036509989726, 0.1081472545783, 0.1352203734838)),
        (2.00, 0.854772590339, (0.842921029582, 0.2727243411520, 0.3141579408361, 0.3146819320984, 0.3934580545096)),
        (3.00, 0.921836194409, (0.683583301024, 0.4828916235427, 0.6328333979519, 0.5571826425493, 0.6966653505719)),
    ],
)  # fmt: skip
def test_butterfly_validity_figures(fuzziness, west, figures):
    """F, H (ln), FPI = 1 - (cF-1)/(c-1), NCE = H n/(n-c), MPE = H/ln c: e1071 1.7-13 and numpy."""
    found = fuzzy_c_means(BUTTERFLY, START, fuzziness=fuzziness, tolerance=1e-13, most_passes=5000)
    shares = found.memberships
    assert found.centres[0] == pytest.approx([west, 2.0], abs=1e-7)
    ours = [
        index(shares)
        for index in (
            partition_coefficient,
            partition_entropy,
            fuzziness_performance,
            normalised_entropy,
            modified_entropy,
        )
    ]
    assert ours == pytest.approx(figures, abs=1e-7)


def test_adjusted_rand_of_yeung_and_ruzzo():
    """Table of their supplement: printed adjusted Rand 0.313.

    Yeung & Ruzzo 2001, Bioinformatics 17:763-774, details of the adjusted Rand index.
    """
    table = np.array([[1, 1, 0], [1, 2, 1], [0, 0, 4]], dtype=float)
    assert adjusted_rand(table) == pytest.approx(0.313, abs=5e-4)


def test_kappa_of_cohen():
    """Cohen 1968, Psychological Bulletin 70:213-220, table 1: printed 0.492 (cells from memory)."""
    table = np.array([[0.44, 0.07, 0.09], [0.05, 0.20, 0.05], [0.01, 0.03, 0.06]])
    assert kappa(table) == pytest.approx(0.492, abs=1e-3)
