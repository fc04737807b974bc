import json
from dataclasses import replace

import numpy as np
import pytest
import trimesh

from scanmass.doubt import Figure
from scanmass.errors import Declined
from scanmass.geometry.moments import translated
from scanmass.geometry.polyhedron import polyhedron_moments
from scanmass.surface.surface import Closure
from scanmass.uncertainty.bounds import bound
from scanmass.uncertainty.declared import Declared
from scanmass.uncertainty.document import as_document

IRON = Figure.uniform(7000.0, 7400.0)
PLACE = np.array([1.0, -2.0, 0.5])
KEYS = {"value", "std", "low", "high", "degrees_of_freedom", "random", "bracket"}


@pytest.fixture
def box(surface_of):
    mesh = trimesh.creation.box((0.3, 0.2, 0.1))
    return surface_of(trimesh.Trimesh(np.array(mesh.vertices) + PLACE, mesh.faces), source="mesh")


def run(surface, cloud=None, densities=(IRON,), moments=None, **named):
    whole = polyhedron_moments(surface.vertices, surface.faces)[None] if moments is None else moments
    return bound(surface, cloud, densities=densities, part_moments=whole, **named)


def codes(notes):
    return [n.code for n in notes]


def test_nothing_known_claims_nothing(box):
    found = run(box)
    document = as_document(found)
    assert document["noise"]["basis"] == "none"
    assert document["volume_m3"]["value"] == pytest.approx(0.006)
    assert document["center_of_mass_m"]["value"] == pytest.approx(PLACE)
    for name in ("volume_m3", "mass_kg", "center_of_mass_m"):
        assert set(document[name]) - {"covariance", "region"} == KEYS
        assert [document[name][k] for k in ("std", "low", "high", "bracket")] == [None] * 4
        assert document[name]["random"] == {"low": None, "high": None}
    assert document["center_of_mass_m"]["region"] is None
    assert document["inertia_kg_m2"]["low"] is None
    assert [p["cone_deg"] for p in document["principal"]] == [None] * 3
    assert document["budget"] == []
    assert codes(found.warnings) == ["noise-unknown"]
    assert found.replicates is None


def test_nominal_model_has_only_its_density(box):
    document = as_document(run(box, declared=Declared(0.0), densities=[Figure.uniform(7000.0, 7400.0)]))
    assert document["volume_m3"]["std"] == 0
    assert document["volume_m3"]["low"] == document["volume_m3"]["high"] == pytest.approx(0.006)
    # Central 95 % of a uniform density; the ends of 2000 draws stray by 400 sqrt(0.025 x 0.975 / 2000) = 1.4 kg/m3.
    assert document["mass_kg"]["low"] == pytest.approx(0.006 * 7010, abs=0.006 * 5)
    assert document["mass_kg"]["high"] == pytest.approx(0.006 * 7390, abs=0.006 * 5)
    assert document["mass_kg"]["std"] == pytest.approx(0.006 * 400 / np.sqrt(12))
    assert [r["source"] for r in document["budget"]] == ["density"]
    assert document["budget"][0]["share_mass"] == 1.0
    assert [p["determined"] for p in document["principal"]] == [True] * 3


def test_document_is_plain_and_whole(box):
    declared = Declared(1e-4, 0.02, Figure.normal(1.0, 0.0004))
    document = as_document(run(box, declared=declared))
    assert json.loads(json.dumps(document, allow_nan=False)) == document
    assert set(document) == {
        *("noise", "volume_m3", "mass_kg", "center_of_mass_m", "inertia_kg_m2"),
        *("principal", "checks", "budget", "assumptions", "warnings"),
    }
    assert set(document["center_of_mass_m"]) == KEYS | {"covariance", "region"}
    assert set(document["center_of_mass_m"]["region"]) == {"center_m", "radii_m", "axes", "level"}
    assert set(document["principal"][0]) == {"moment_kg_m2", "axis", "cone_deg", "determined", "plane_normal"}
    rows = document["budget"]
    assert [r["source"] for r in rows] == ["scan noise", "scale", "density"]
    assert sum(r["share_mass"] for r in rows) == pytest.approx(1)
    assert sum(r["share_com"] for r in rows) == pytest.approx(1)
    total = np.sqrt(sum(r["mass_std_kg"] ** 2 for r in rows))
    assert document["mass_kg"]["std"] == pytest.approx(total)
    covariance = np.array(document["center_of_mass_m"]["covariance"])
    assert np.sqrt(np.diag(covariance)) == pytest.approx(document["center_of_mass_m"]["std"])
    # Scale: three times 0.04 % of the mass.
    assert rows[1]["mass_std_kg"] == pytest.approx(0.0012 * document["mass_kg"]["value"])


def test_bounds_move_and_turn_with_the_object(box):
    declared = Declared(1e-4, 0.02, Figure.normal(1.0, 0.0004))
    here = run(box, declared=declared, densities=[Figure.normal(7200.0, 50.0)])
    there = run(replace(box, vertices=box.vertices + 3.0), declared=declared, densities=[Figure.normal(7200.0, 50.0)])
    # Rounding at 3 m breaks ties between seeds, so some patches differ; a patch in fifty is 1 % at most.
    assert there.mass.std == pytest.approx(here.mass.std, rel=0.01)
    assert there.com.std == pytest.approx(here.com.std, rel=0.01)
    assert there.com.low == pytest.approx(here.com.low + 3.0, abs=0.01 * here.com.std.max() * 2)
    turn = np.array([[0.0, -1, 0], [1, 0, 0], [0, 0, 1]])
    turned = run(
        replace(box, vertices=box.vertices @ turn.T), declared=declared, densities=[Figure.normal(7200.0, 50.0)]
    )
    # Other seeds give other patches: the field over 0.02 m feels their width.
    assert turned.com.std[[1, 0, 2]] == pytest.approx(here.com.std, rel=0.05)
    assert turned.principal.std == pytest.approx(here.principal.std, rel=0.05)


def test_brackets_reach_over_the_closures(box):
    whole = polyhedron_moments(box.vertices, box.faces)
    hollow = polyhedron_moments((box.vertices - PLACE) * 0.5 + PLACE + [0, 0, -0.02], box.faces)
    open_below = replace(box, closures=(Closure("solid", whole), Closure("hollow from below", whole - hollow)))
    alone = run(box, declared=Declared(1e-4, 0.02))
    found = run(open_below, declared=Declared(1e-4, 0.02))
    assert found.volume.bracket_low == pytest.approx(0.006 * 7 / 8)
    assert found.volume.bracket_high == pytest.approx(0.006)
    assert found.mass.random_low == pytest.approx(alone.mass.random_low)
    assert found.mass.high == pytest.approx(alone.mass.high)
    # The hollow one's own low: its own mass at the low end of the density.
    assert found.mass.low == pytest.approx(0.006 * 7 / 8 * 7010, rel=2e-3)
    # Taking out an eighth 0.02 m below the middle lifts the centre by 0.02 / 7.
    assert found.com.bracket_high[2] == pytest.approx(PLACE[2] + 0.02 / 7)
    assert found.com.high[2] > found.com.bracket_high[2]
    assert np.all(found.principal.low < found.principal.bracket_low)
    row = as_document(found)["budget"][-1]
    assert (row["source"], row["kind"], row["share_mass"], row["mass_std_kg"]) == (
        "unseen surface",
        "bracket",
        None,
        None,
    )
    assert row["mass_half_range_kg"] == pytest.approx(7200 * 0.006 / 16)
    assert row["com_half_range_m"] == pytest.approx([0, 0, 0.01 / 7], abs=1e-12)
    assert set(found.closure_replicates) == {"solid", "hollow from below"}
    nothing = run(open_below)
    assert nothing.mass.low is None
    assert nothing.mass.bracket_high == pytest.approx(43.2)


def test_reconstruction_counts_half_its_step(box):
    whole = polyhedron_moments(box.vertices, box.faces)
    coarse = translated(polyhedron_moments((box.vertices - PLACE) * 1.001, box.faces), PLACE)
    found = run(replace(box, settling_moments=coarse), declared=Declared(0.0), densities=[Figure.exact(1000.0)])
    assert found.volume.std == pytest.approx(0.5 * abs(coarse[0] - whole[0]))
    assert found.com.std == pytest.approx(np.zeros(3), abs=1e-12)
    assert [r.source for r in found.budget] == ["reconstruction"]


def test_unstated_density_leaves_mass_without_bounds(box):
    found = run(box, declared=Declared(1e-4, 0.02), densities=[Figure(7200.0)])
    assert found.mass.value == pytest.approx(43.2)
    assert found.mass.low is None
    assert found.inertia.low is None
    assert found.principal.low is None
    assert found.volume.low is not None
    assert found.com.low is not None
    assert codes(found.warnings) == ["density-doubt-unknown"]
    rows = as_document(found)["budget"]
    assert rows[0]["mass_std_kg"] is None
    assert rows[0]["share_com"] == 1.0


def test_upper_bound_needs_its_coarse_surface(surface_of, on_sphere, cloud_of):
    ball = surface_of(trimesh.creation.icosphere(5, 0.5))
    coarse = trimesh.creation.icosphere(2, 0.5)
    cloud = cloud_of(0.5 * on_sphere(np.random.default_rng(0), 4000), np.zeros(4000, int))
    found = run(ball, cloud, coarse=lambda: (np.array(coarse.vertices), np.array(coarse.faces, np.int64)))
    assert found.noise.basis == "upper_bound"
    assert found.volume.low < 0.5236 < found.volume.high
    assert not found.axes.determined.any()
    assert run(ball, cloud).noise.basis == "none"


def test_no_body_is_declined(box):
    with pytest.raises(Declined, match=r"the body has a volume of -0\.006 m3"):
        run(replace(box, faces=box.faces[:, ::-1]))


def test_views_bound_a_scanned_ball(surface_of, cloud_of, on_sphere):
    """Six views of half a ball each, with white noise, a shift each, and a lumpy error each."""
    rng = np.random.default_rng(3)
    parts, labels = [], []
    for v in range(6):
        points = on_sphere(rng, 30_000)
        points = points[points @ on_sphere(rng, 1)[0] > -0.3]
        waves = rng.normal(size=(50, 3)) / 0.1
        lumps = 0.0005 * np.sqrt(2 / 50) * np.cos(points @ waves.T + rng.uniform(0, 7, 50)).sum(axis=1)
        radius = 0.5 + lumps + 0.0005 * rng.normal(size=len(points))
        parts.append(points * radius[:, None] + 0.0003 * rng.normal(size=3))
        labels.append(np.full(len(points), v))
    surface = surface_of(trimesh.creation.icosphere(6, 0.5))
    found = run(surface, cloud_of(np.concatenate(parts), np.concatenate(labels)), densities=[Figure.exact(1000.0)])
    assert found.noise.basis == "views"
    # 420 cells of the field per view settle its size to about 10 %; poses take a little of it.
    assert found.noise.std == pytest.approx(0.0005, rel=0.25)
    assert found.noise.length == pytest.approx(0.05, rel=0.3)
    # Fifteen motions against their mean settle 0.0003 to 18 %: three of those.
    assert found.noise.shift_std == pytest.approx(0.0003, rel=0.55)
    # A ball's turns are never seen.
    assert found.noise.rotation_std == 0
    assert [r.source for r in found.budget][:2] == ["scan noise", "view shifts"]
    # Patches of some samples are denser than the mesh here; a ball has no edges to speak of.
    assert all((r.share_mass or 0.0) < 0.01 for r in found.budget[2:])
    assert found.com.degrees_of_freedom.min() >= 5
    assert found.region.radii[0] > 2 * found.com.std.max()
    assert "errors-common-to-all-views-not-seen" in codes(found.assumptions)
    declared = run(surface, cloud_of(np.concatenate(parts), np.concatenate(labels)), declared=Declared(2e-4, 0.05))
    assert "declared noise common to all views" in [r.source for r in declared.budget]
    assert declared.volume.std > found.volume.std


def test_same_seed_same_document(box):
    one, two = (as_document(run(box, declared=Declared(1e-4), seed=5)) for _ in range(2))
    assert json.dumps(one) == json.dumps(two)


def test_thin_views_get_fewer_patches(surface_of, cloud_of, on_sphere):
    rng = np.random.default_rng(4)
    points = on_sphere(rng, 9000) * (0.5 + 0.001 * rng.normal(size=9000))[:, None]
    cloud = cloud_of(points, rng.integers(0, 3, 9000))
    found = run(surface_of(trimesh.creation.icosphere(5, 0.5)), cloud, densities=[Figure.exact(1000.0)])
    # 9000 / (12 x 3); with a thousand patches hardly one would hold three samples of each view.
    assert len(found.patches.areas) == pytest.approx(250, abs=5)
    assert found.noise.basis == "views"


def test_a_mass_is_never_below_nothing(surface_of):
    box = surface_of(trimesh.creation.box((1, 1, 0.02)))
    found = run(box, declared=Declared(0.012, 1.0), densities=[Figure.exact(1000.0)])
    assert float(found.mass.low) == 0.0
    assert float(found.volume.random_low) == 0.0
    assert float(found.mass.high) > float(found.mass.value)
