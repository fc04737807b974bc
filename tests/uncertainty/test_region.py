import numpy as np
import pytest

from scanmass.uncertainty.region import quantile, region


@pytest.mark.parametrize("nu", [None, 5.0])
def test_region_holds_the_stated_share(nu):
    rng = np.random.default_rng(0)
    factor = rng.normal(size=(3, 3))
    draws = rng.normal(size=(20_000, 3))
    if nu is not None:
        draws /= np.sqrt(rng.chisquare(nu, len(draws)) / nu)[:, None]
    found = region(np.array([1.0, 2.0, 3.0]), factor.T @ factor, 0.95, nu)
    # Binomial error of 20 000 trials 0.0015: three of them.
    assert found.holds(found.center + draws @ factor).mean() == pytest.approx(0.95, abs=0.0047)
    assert np.all(np.diff(found.radii) <= 0)
    assert found.axes @ found.axes.T == pytest.approx(np.eye(3), abs=1e-12)
    assert np.linalg.det(found.axes) == pytest.approx(1)


def test_quantile_is_the_chi_square_table():
    # chi-square(3), 95 %: 7.815; F(3, 5), 95 %: 5.409.
    assert quantile(3, 0.95, None) == pytest.approx(7.815, abs=5e-4)
    assert quantile(3, 0.95, 5.0) == pytest.approx(3 * 5.409, abs=2e-3)


def test_exact_centre_is_a_point():
    found = region(np.zeros(3), np.zeros((3, 3)), 0.95, None)
    assert found.holds(np.zeros((1, 3))).all()
    assert not found.holds(np.array([[1e-9, 0, 0]])).any()
