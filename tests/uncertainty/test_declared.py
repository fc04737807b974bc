import numpy as np
import pytest
import trimesh

from scanmass.uncertainty import patches
from scanmass.uncertainty.declared import Declared, field_rows, from_declaration, unknown, upper_bound


@pytest.fixture
def ball(surface_of):
    return patches.make(surface_of(trimesh.creation.icosphere(5, 0.5)), None, centre=np.zeros(3))


@pytest.mark.parametrize("length", [0.1, 0.2, 0.4])
def test_volume_of_a_ball_under_a_gaussian_field(ball, length):
    rows = field_rows(ball, 0.001, length)
    # Integral of exp(-d^2 / 2 l^2) over two points of a sphere R, d^2 = 2 R^2 (1 - cos): with k = R^2 / l^2,
    # 4 pi R^2 x 2 pi R^2 x (1 - exp(-2 k)) / k.
    k = 0.25 / length**2
    want = 0.001 * np.sqrt(8 * np.pi**2 * 0.5**4 * (1 - np.exp(-2 * k)) / k)
    # Patches 0.056 across: a share of (0.056 / 0.1)^2 / 12 of the variance at the shortest, half of it in the
    # deviation, and the area of the mesh.
    assert np.sqrt((rows[:, 0] ** 2).sum()) == pytest.approx(want, rel=0.015)


def test_longest_field_moves_the_whole_surface(ball):
    rows = field_rows(ball, 0.001, 1e4)
    assert np.sqrt((rows[:, 0] ** 2).sum()) == pytest.approx(0.001 * np.pi, rel=1e-3)


def test_white_noise_averages_over_points(ball, surface_of, cloud_of, on_sphere):
    rng = np.random.default_rng(0)
    points = 0.5 * on_sphere(rng, 90_000)
    seen = patches.make(
        surface_of(trimesh.creation.icosphere(5, 0.5)), cloud_of(points, np.zeros(90_000, int)), centre=np.zeros(3)
    )
    rows = field_rows(seen, 0.001, 0.0)
    # The volume's error is the area times a mean of 90 000; uneven counts per patch cost about 1 / 90 of it.
    assert np.sqrt((rows[:, 0] ** 2).sum()) == pytest.approx(np.pi * 0.001 / 300, rel=0.02)


def test_missing_length_is_assumed_and_said(ball):
    model = from_declaration(ball, Declared(noise_std=0.0005))
    assert model.length == pytest.approx(0.1)
    assert [n.code for n in model.assumptions] == ["noise-length-assumed"]
    assert "100 mm" in model.assumptions[0].text
    given = from_declaration(ball, Declared(0.0005, 0.1))
    assert given.assumptions == ()
    assert given.parts[0][1] == pytest.approx(model.parts[0][1])


def test_exact_surface_has_no_doubt(ball):
    model = from_declaration(ball, Declared(noise_std=0.0))
    assert (model.basis, model.std, model.parts) == ("declared", 0.0, ())
    assert [n.code for n in model.assumptions] == ["surface-exact"]


def test_unknown_says_what_to_do(ball):
    model = unknown(ball)
    assert (model.basis, model.std, model.parts) == ("none", None, ())
    assert model.warnings[0].code == "noise-unknown"
    assert "Declare scan.noise_std" in model.warnings[0].text


def test_upper_bound_is_above_the_noise(ball, on_sphere):
    rng = np.random.default_rng(1)
    coarse = trimesh.creation.icosphere(3, 0.5)
    points = on_sphere(rng, 5000) * (0.5 + 0.002 * rng.normal(size=5000))[:, None]
    model = upper_bound(ball, points, np.array(coarse.vertices), np.array(coarse.faces, np.int64))
    assert model.basis == "upper_bound"
    assert 0.002 < model.std < 0.004
    assert [n.code for n in model.warnings] == ["noise-upper-bound"]
    assert upper_bound(ball, points[:499], np.array(coarse.vertices), np.array(coarse.faces, np.int64)) is None


def test_two_views_tell_no_bound_of_their_own(surface_of, cloud_of, on_sphere):
    rng = np.random.default_rng(2)
    ball = trimesh.creation.icosphere(4, 0.5)
    points = 0.5 * on_sphere(rng, 4000)
    two = patches.make(surface_of(ball), cloud_of(points, np.arange(4000) % 2), centre=np.zeros(3))
    (note,) = from_declaration(two, Declared(0.001, 0.1)).warnings
    assert note.code == "two-views"
    assert "no 95 % follows from the data" in note.text
    model = upper_bound(two, points, np.array(ball.vertices), np.array(ball.faces, np.int64))
    assert [n.code for n in model.warnings] == ["noise-upper-bound", "two-views"]


def test_declared_numbers_are_checked():
    with pytest.raises(ValueError, match="noise_std must be zero or more, got -1"):
        Declared(noise_std=-1)
