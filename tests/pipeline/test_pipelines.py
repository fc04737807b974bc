"""Every file in pipelines/ on the sample it is for, with checked numbers against the sample's truth."""

from __future__ import annotations

import json
from dataclasses import dataclass, field
from functools import cache
from typing import Any

import numpy as np
import pytest

from scanmass.pipeline.record import MassResult
from scanmass.report.schema import validate
from tests.pipeline.conftest import ROOT, Sample

VIEWS = tuple(f"casting_views_{k}.ply" for k in range(1, 7))
STONE = ("stone_turntable.ply",)
# Whatever is taken to be uniform, solid and of a table's density says so; views cannot see what they have in common.
SOLID, RANGE = "solid-throughout", "density-range"
COMMON = "errors-common-to-all-views-not-seen"


@dataclass(frozen=True)
class Job:
    """A pipeline file, the scans it is for, and what must come out.

    Tolerances: ``volume`` relative, ``centre`` metres on each axis, ``moments`` relative at the truth's density.
    ``misses``: figures whose bounds are known not to hold the truth: by how much at most (SI), and why.
    """

    scans: tuple[str, ...]
    truth: str
    volume: float
    centre: float
    moments: float
    up_from: str | None
    underside: str
    observed: tuple[float, float]
    basis: str
    removed: frozenset[str]
    notes: frozenset[str]
    axes_deg: tuple[float, float, float] = (1.0, 1.0, 1.0)
    outside_only: bool = False
    density_holds: bool = True
    misses: dict[str, tuple[float, str]] = field(default_factory=dict)


POCKETS = (
    "The pockets under the beast's flanks and between its paws were not seen from any station. Each is bracketed by "
    "the membrane over it and by the tangents at its rim; the true pockets are deeper than either on one side, and "
    "the true centre of mass lies 0.3 to 0.4 mm (0.06 % of the length) beyond its bounds along y."
)
HOLES = (
    "The bottom of the side boss's blind bore and the neck under that boss were seen by no view: the surface closes "
    "them too early, by 0.26 and 0.20 % of the volume, and their brackets do not reach far enough. Both pull the "
    "centre of mass towards the boss by 0.6 mm along x, to the very edge of its bounds: a few um in or out of them."
)
FLAT_STONE = {
    # The pockets (see above) hold 0.4 % too much and lack 0.6 %, at 0.1 to 0.2 m from the middle: 0.2 % of volume,
    # 0.7 mm of centre, 0.5 % of moments.
    "volume": 0.005,
    "centre": 0.0010,
    "moments": 0.008,
    "up_from": "support",
    "underside": "flat",
    # The underside is 23 % of the surface and the pockets some 6 %.
    "observed": (0.62, 0.77),
    "basis": "views",
    "removed": frozenset({"support plane", "turntable", "clutter", "outlier"}),
    "misses": {"center_of_mass_m.y": (0.0006, POCKETS)},
}
STONE_NOTES = frozenset({SOLID, COMMON, "support-removed", "turntable-removed", "clutter-removed", "hole-closed"})

JOBS = {
    "stone_underside_unknown.yaml": Job(
        STONE,
        "stone_turntable",
        # The best guess lies midway between rim and floor: half of the missing slab, 3.5 % of the volume and 3 mm.
        volume=0.03,
        centre=0.003,
        moments=0.05,
        up_from="support",
        underside="unknown",
        observed=(0.62, 0.78),
        basis="views",
        removed=frozenset({"support plane", "turntable", "clutter", "outlier"}),
        notes=STONE_NOTES | {RANGE, "scale-taken-as-exact", "nothing-recessed-above-rim"},
    ),
    "stone_underside_flat.yaml": Job(
        STONE, "stone_turntable", notes=STONE_NOTES | {RANGE, "scale-taken-as-exact"}, **FLAT_STONE
    ),
    # A shape in plaster: its mass has no truth of its own, so only the shape is compared.
    "plaster_by_density.yaml": Job(STONE, "stone_turntable", notes=STONE_NOTES, density_holds=False, **FLAT_STONE),
    "iron_casting_single_cloud.yaml": Job(
        ("iron_casting.pcd",),
        "iron_casting",
        # White noise of 0.06 mm at 2.9 mm resolution: concave edges and thin ribs fill by some tenths of a per cent.
        volume=0.008,
        centre=0.0003,
        moments=0.01,
        up_from=None,
        underside="seen",
        observed=(0.97, 1.0),
        basis="declared",
        removed=frozenset({"outlier"}),
        notes=frozenset({SOLID, RANGE, "porosity-lowers-density", "hole-closed"}),
    ),
    "iron_casting_views.yaml": Job(
        VIEWS,
        "casting_views",
        # As above, and 2 % of the surface unseen: the depths of some holes, and a part under the side boss.
        volume=0.012,
        centre=0.0010,
        moments=0.014,
        up_from=None,
        underside="seen",
        observed=(0.94, 0.99),
        basis="views",
        removed=frozenset({"grid edge", "outlier"}),
        notes=frozenset({SOLID, RANGE, "porosity-lowers-density", COMMON, "hole-closed"}),
        misses={"center_of_mass_m.x": (0.0001, HOLES)},
    ),
    "rotor.yaml": Job(
        ("rotor.xyz",),
        "rotor",
        # Sharp edges round by some 0.1 % at 1.7 mm resolution; the discs sit unevenly along the shaft.
        volume=0.003,
        centre=0.0002,
        moments=0.004,
        up_from=None,
        underside="seen",
        observed=(0.99, 1.0),
        basis="views",
        removed=frozenset({"outlier"}),
        notes=frozenset({SOLID, RANGE, COMMON}),
        # Two moments are 0.08 % apart: their axes turn by degrees in their plane for errors of this size.
        axes_deg=(0.1, 4.0, 4.0),
    ),
    "hollow_bronze.yaml": Job(
        ("hollow_bronze.stl",),
        "hollow_bronze",
        # The very mesh the truth was integrated over, by another kernel: rounding.
        volume=1e-9,
        centre=1e-10,
        moments=1e-9,
        axes_deg=(1e-4, 1e-4, 1e-4),
        up_from="declared",
        underside="seen",
        observed=(1.0, 1.0),
        basis="declared",
        removed=frozenset(),
        notes=frozenset({SOLID, RANGE, "porosity-lowers-density", "inner-cavities"}),
    ),
    "bronze_outside_only.yaml": Job(
        ("hollow_bronze.e57",),
        "hollow_bronze",
        # The foot is guessed midway between its rim and the floor, some millimetres apart, at the far end.
        volume=0.008,
        centre=0.002,
        moments=np.inf,
        up_from="support",
        underside="unknown",
        observed=(0.9, 0.95),
        basis="views",
        removed=frozenset({"support plane", "grid edge", "outlier"}),
        notes=frozenset({SOLID, RANGE, "porosity-lowers-density", COMMON, "support-removed"}),
        outside_only=True,
        density_holds=False,
    ),
    "nominal_model.yaml": Job(
        ("casting_nominal.stl",),
        "casting_nominal",
        # As for the bronze's mesh.
        volume=1e-9,
        centre=1e-10,
        moments=1e-9,
        axes_deg=(1e-4, 1e-4, 1e-4),
        up_from=None,
        underside="seen",
        observed=(1.0, 1.0),
        basis="declared",
        removed=frozenset(),
        notes=frozenset({SOLID, "surface-exact", "scale-taken-as-exact"}),
    ),
}


@cache
def truth_of(job: str) -> dict[str, Any]:
    """The sample's truth; of the outer shape alone where the scan sees no more."""
    truth: dict[str, Any] = json.loads((ROOT / "sample_scans" / f"{JOBS[job].truth}.truth.json").read_text("utf-8"))
    if JOBS[job].outside_only:
        return truth | {"volume_m3": truth["outer_volume_m3"], "center_of_mass_m": truth["outer_centroid_m"]}
    return truth


@pytest.fixture(params=JOBS)
def job(request: pytest.FixtureRequest) -> str:
    name: str = request.param
    return name


@pytest.fixture
def result(job: str, sample: Sample) -> MassResult:
    return sample(job, JOBS[job].scans)


def test_every_pipeline_file_is_tested() -> None:
    assert {path.name for path in (ROOT / "pipelines").iterdir()} == set(JOBS)


def test_values(job: str, result: MassResult) -> None:
    wanted, truth = JOBS[job], truth_of(job)
    assert result["volume_m3"]["value"] == pytest.approx(truth["volume_m3"]["value"], rel=wanted.volume)
    error = np.array(result["center_of_mass_m"]["value"]) - truth["center_of_mass_m"]["value"]
    np.testing.assert_allclose(error, 0.0, atol=wanted.centre)
    density = result["density"]["mean_kg_m3"]["value"]
    assert result["mass_kg"]["value"] == pytest.approx(density * result["volume_m3"]["value"], rel=1e-12)
    if wanted.outside_only:
        return
    to_truth = truth["density"]["mean_kg_m3"]["value"] / density
    for found, true, reach in zip(result["principal"], truth["principal"], wanted.axes_deg, strict=True):
        moment = to_truth * found["moment_kg_m2"]["value"]
        assert moment == pytest.approx(true["moment_kg_m2"]["value"], rel=wanted.moments)
        across = np.linalg.norm(np.cross(found["axis"], true["axis"]))
        assert np.degrees(np.arcsin(min(float(across), 1.0))) <= reach


def claims(job: str, result: MassResult) -> dict[str, tuple[float, float, float]]:
    """Name to (low, truth, high) of what a job's bounds say, where the sample has a truth to compare."""
    truth, center = truth_of(job), result["center_of_mass_m"]
    found = {"volume_m3": (result["volume_m3"]["low"], truth["volume_m3"]["value"], result["volume_m3"]["high"])}
    for k, axis in enumerate("xyz"):
        found[f"center_of_mass_m.{axis}"] = (center["low"][k], truth["center_of_mass_m"]["value"][k], center["high"][k])
    if JOBS[job].density_holds:
        found["mass_kg"] = (result["mass_kg"]["low"], truth["mass_kg"]["value"], result["mass_kg"]["high"])
        for k, (a, b) in enumerate(zip(result["principal"], truth["principal"], strict=True)):
            moment = a["moment_kg_m2"]
            found[f"principal.{k}"] = (moment["low"], b["moment_kg_m2"]["value"], moment["high"])
    return found


def test_truth_lies_in_the_bounds(job: str, result: MassResult) -> None:
    # A drawing's bounds have no width: what is left is the rounding of two summations (1e-12 m where the truth is 0).
    outside = {}
    for name, (low, true, high) in claims(job, result).items():
        beyond = max(low - true, true - high) - 1e-9 * abs(true) - 1e-12
        if beyond > JOBS[job].misses.get(name, (0.0, ""))[0]:
            outside[name] = (low, true, high)
    assert outside == {}


def test_bounds_hold_their_value_and_say_something(job: str, result: MassResult) -> None:
    for name in ("volume_m3", "mass_kg"):
        bound = result[name]
        # Summed two ways where nothing is in doubt.
        assert bound["low"] <= bound["value"] * (1 + 1e-12)
        assert bound["value"] <= bound["high"] * (1 + 1e-12)
    # No bound on a shape of which two thirds were seen is wider than a tenth of it, either way.
    assert result["volume_m3"]["low"] / result["volume_m3"]["value"] > 0.9
    assert result["volume_m3"]["high"] / result["volume_m3"]["value"] < 1.1
    shares = [row["share_mass"] for row in result["budget"] if row["share_mass"] is not None]
    assert sum(shares) == pytest.approx(1.0, abs=1e-9)


def test_which_way_is_up_and_what_was_seen(job: str, result: MassResult) -> None:
    wanted, truth = JOBS[job], truth_of(job)
    frame, surface = result["frame"], result["surface"]
    assert frame["up_from"] == wanted.up_from
    assert (frame["up"] is None) == (wanted.up_from is None)
    if frame["up"] is not None:
        # The table is a metre across, its points within 0.3 mm and its views' poses within 0.03 degrees.
        assert np.degrees(np.arccos(np.dot(frame["up"], truth["frame"]["up"]))) < 0.1
        height = result["center_of_mass_m"]["height_above_base_m"]
        true = truth["center_of_mass_m"]["value"][2] - truth["support_height_m"]
        assert height["low"] <= true <= height["high"]
    assert surface["closed"]
    assert surface["underside"] == wanted.underside
    assert wanted.observed[0] <= surface["observed_fraction"] <= wanted.observed[1]
    # Two of the bronze: its skin and its core space.
    assert surface["shells"] == (2 if job == "hollow_bronze.yaml" else 1)


def test_noise_removals_and_notes(job: str, result: MassResult) -> None:
    wanted = JOBS[job]
    assert result["noise"]["basis"] == wanted.basis
    assert {row["reason"] for row in result["removed"]} == wanted.removed
    said = [note["code"] for note in result["assumptions"]]
    assert set(said) >= wanted.notes
    # A note not expected here would be a new assumption that someone must look at: only holes and cavities are shape's.
    of_gaps = {"hole-closed", "nothing-recessed-above-rim", "underside-partly-off-the-floor", "underside-as-declared"}
    assert set(said) - wanted.notes <= of_gaps


def test_the_document_keeps_the_contract(job: str, result: MassResult) -> None:
    validate(result.document)
    assert [scan["file"] for scan in result["scans"]] == list(JOBS[job].scans)
    points = [file["points"] for file in truth_of(job)["scans"] if file["file"] in JOBS[job].scans]
    # Points are what was measured, cells of a range grid that hold nothing are not. (STL has three corners a face.)
    if not JOBS[job].scans[0].endswith(".stl"):
        assert [scan["points"] for scan in result["scans"]] == points
        removed = sum(row["points"] for row in result["removed"])
        assert sum(scan["points_used"] for scan in result["scans"]) + removed == sum(points)
        assert sum(row["share"] for row in result["removed"]) == pytest.approx(removed / sum(points), abs=1e-12)
    difference = result["checks"]["routes_relative_difference"]
    # The two routes agree to rounding (design section 4 asks 1e-9).
    assert max(difference.values()) < 1e-9


def test_outside_of_a_hollow_bronze_only_limits_its_weight(sample: Sample) -> None:
    job = "bronze_outside_only.yaml"
    result = sample(job, JOBS[job].scans)
    # Solid it would weigh six times what it does: the result must not be taken for the casting's mass, and says so.
    assert result["mass_kg"]["low"] > 5.0 * truth_of(job)["mass_kg"]["value"]
    text = next(note["text"] for note in result["assumptions"] if note["code"] == SOLID)
    assert "no scan shows hollows" in text


def test_rotor_is_given_from_its_shaft_ends(sample: Sample) -> None:
    rows = sample("rotor.yaml", ("rotor.xyz",))["center_of_mass_m"]["offsets"]
    assert [row["name"] for row in rows] == ["shaft end, plain", "shaft end with keyway"]
    first, second = (np.array(row["offset_m"]["value"]) for row in rows)
    # The ends are 15.748 inches apart along x.
    np.testing.assert_allclose(first - second, [15.748 * 0.0254, 0.0, 0.0], atol=1e-12)
    # Off the shaft by unbalance over mass, towards the side opposite the drilled hole: 24 and -95 um, known to 21 um
    # as stated (two standard deviations of the noise and poses).
    truth = truth_of("rotor.yaml")
    off = np.array(truth["unbalance"]["static_kg_m"][1:]) / truth["mass_kg"]["value"]
    np.testing.assert_allclose(first[1:], off, atol=4e-5)
