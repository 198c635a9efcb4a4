"""Growth of a mixed layer into constant stratification.

Sources: Tennekes (1973), J. Atmos. Sci. 30, 558-567: entrainment flux A times that at the ground (about 0.2, reported
0.1 to 0.3), h^2 = 2 (1 + 2A) integral of w'theta' dt / gamma; A = 0 gives encroachment. The originals were not seen,
the formulas are quoted in many texts. The jump at the top, A gamma h / (1 + 2A), is from memory. Check numbers with
gamma 7.5 K/km and w'theta' 0.15 K m/s are own computations of those formulas.
"""

import numpy as np
import pytest

from etflux import column

GAMMA, FLUX = 0.0075, 0.15
FINE = np.full(300, 10.0)  # kg m-2; with a density of 1 kg m-3 mass is height


def _layers(mass):
    edge = np.concatenate([[0.0], np.cumsum(mass)])
    return 300.0 + GAMMA * 0.5 * (edge[1:] + edge[:-1])[None]


@pytest.mark.parametrize(
    ("hours", "encroachment_m", "depth_m", "jump_k"),
    [(1, 379.5, 449.0, 0.481), (3, 657.3, 777.7, 0.833), (6, 929.5, 1099.8, 1.178)],
)
def test_check_numbers(hours, encroachment_m, depth_m, jump_k):
    supply = np.array([[FLUX * 3600.0 * hours]])
    for entrainment, expected in ((0.0, encroachment_m), (0.2, depth_m)):
        need = column.heat_need(_layers(FINE), entrainment, FINE)
        assert column.mixed_mass(need, supply)[0, 0] == pytest.approx(expected, abs=0.05)
    gap = 0.5 * GAMMA * depth_m**2
    assert (gap - supply[0, 0]) / depth_m == pytest.approx(jump_k, abs=0.0015)  # (G - F)/M


@pytest.mark.parametrize("entrainment", [0.0, 0.05, 0.1, 0.2, 0.3, 0.4])
def test_constant_stratification_with_the_layers_used(entrainment):
    """(1 + 2A) F = G to 0.1 % on the layers of the column, at their edges and between."""
    need = column.heat_need(_layers(column.LAYER_MASS), entrainment)
    mass = np.array([[75.0, 333.0, 1111.0, 2222.0, 2900.0, 4000.0]])
    supply = 0.5 * GAMMA * mass**2 / (1.0 + 2.0 * entrainment)
    assert column.mixed_mass(need, supply) == pytest.approx(mass, rel=1e-3)
    assert need.need[:, :-1] * (1.0 + 2.0 * entrainment) == pytest.approx(need.gap, rel=1e-3)


def test_finer_layers_converge():
    """A night's cooling and a cap without corners: halving the layers takes the error down by more than three times."""
    supply = np.array([[700.0, 1500.0, 4000.0]])

    def below(mass):  # integral of theta from the ground
        night = -7.0 * 130.0 * (1.0 - np.exp(-mass / 130.0))
        cap = 2.0 * 100.0 * np.log(np.cosh((mass - 1500.0) / 100.0))
        return 302.0 * mass + night + cap + 0.0005 * mass**2

    def mixed(thickness):
        mass = np.full(int(3600 / thickness), thickness)
        edge = np.concatenate([[0.0], np.cumsum(mass)])
        return column.mixed_mass(column.heat_need((np.diff(below(edge)) / mass)[None], 0.2, mass), supply)

    finest = mixed(1.5)
    errors = [np.abs(mixed(thickness) / finest - 1.0).max() for thickness in (60.0, 30.0, 15.0)]
    assert errors[0] < 0.01
    assert errors[0] > 3.0 * errors[1] > 9.0 * errors[2]
