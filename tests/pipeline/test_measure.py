"""The whole chain on a pebble whose integrals are known: what must not change, and what must."""

from __future__ import annotations

from collections.abc import Sequence
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path
from typing import Any

import numba
import numpy as np
import pytest

import scanmass
from scanmass.errors import Declined, PipelineFault, ScanFault, UserFault
from scanmass.pipeline.record import MassResult
from scanmass.report.schema import validate
from tests.pipeline import pebble

TRUE = pebble.exact()
SIZE = 0.24
"""Longest side of the pebble, metres."""


def center(result: MassResult) -> np.ndarray:
    return np.array(result["center_of_mass_m"]["value"])


def inertia(result: MassResult) -> np.ndarray:
    return np.array(result["inertia_kg_m2"]["value"])


def codes(result: MassResult, block: str = "assumptions") -> set[str]:
    return {note["code"] for note in result[block]}


def row(result: MassResult, source: str) -> dict[str, Any]:
    found: dict[str, Any] = next(r for r in result["budget"] if r["source"] == source)
    return found


@pytest.mark.parametrize("fixture", ["of_cloud", "of_views"])
def test_truth_and_its_bounds(fixture: str, request: pytest.FixtureRequest) -> None:
    result: MassResult = request.getfixturevalue(fixture)
    validate(result.document)
    # Chords of a smooth body at 8 mm cells, and poses 0.1 mm wrong in four views: design section 4 gives 0.08 %.
    assert result["volume_m3"]["value"] == pytest.approx(TRUE.volume, rel=0.001)
    np.testing.assert_allclose(center(result), TRUE.centre, atol=0.0002)
    np.testing.assert_allclose(inertia(result), TRUE.inertia, atol=0.002 * TRUE.principal[2])
    middle, volume = result["center_of_mass_m"], result["volume_m3"]
    assert volume["low"] <= TRUE.volume <= volume["high"]
    assert (np.array(middle["low"]) <= TRUE.centre).all()
    assert (np.array(middle["high"]) >= TRUE.centre).all()
    for found, true in zip(result["principal"], TRUE.principal, strict=True):
        assert found["moment_kg_m2"]["low"] <= true <= found["moment_kg_m2"]["high"]
    assert result["removed"] == []
    assert result["surface"]["observed_fraction"] > 0.999


def test_same_bytes_for_any_number_of_workers(view_files: Sequence[Path], of_views: MassResult) -> None:
    threads = numba.get_num_threads()
    assert scanmass.measure(view_files, pebble.settings(), workers=2).to_json() == of_views.to_json()
    with ThreadPoolExecutor(2) as executor:
        shared = scanmass.measure(view_files, pebble.settings(), executor=executor)
    assert shared.to_json() == of_views.to_json()
    assert numba.get_num_threads() == threads


def test_the_seed_draws_the_replicates_only(view_files: Sequence[Path], of_views: MassResult) -> None:
    other = scanmass.measure(view_files, pebble.settings(), seed=1)
    for name in ("volume_m3", "mass_kg", "center_of_mass_m", "inertia_kg_m2"):
        assert other[name]["value"] == of_views[name]["value"]
    first, second = of_views.products.replicates, other.products.replicates
    assert first.keys() == second.keys()
    assert len(first["volume_m3"]) == 400
    assert not np.array_equal(first["volume_m3"], second["volume_m3"])
    # Halves of 400 draws, with the long tails of four views: quartiles apart are known to 6.5 % each; four times that.
    spread = [np.subtract(*np.quantile(drawn["volume_m3"], [0.75, 0.25])) for drawn in (first, second)]
    assert spread[0] / spread[1] == pytest.approx(1.0, abs=4.0 * 0.065 * np.sqrt(2.0))


def test_a_kilometre_away(tmp_path: Path, of_cloud: MassResult) -> None:
    scan = pebble.write_ply(tmp_path / "far.ply", 1000.0 * pebble.cloud() + 1e6)
    far = scanmass.measure(scan, pebble.settings(noise_std="0.1 mm", noise_length="0 mm"))
    # Doubles in millimetres round by 1e-13 m there; some hundred operations later 1e-10.
    np.testing.assert_allclose(center(far) - 1000.0, center(of_cloud), atol=1e-10)
    assert far["volume_m3"]["value"] == pytest.approx(of_cloud["volume_m3"]["value"], rel=1e-8)
    assert far["volume_m3"]["std"] == pytest.approx(of_cloud["volume_m3"]["std"], rel=1e-5)
    np.testing.assert_allclose(far["center_of_mass_m"]["std"], of_cloud["center_of_mass_m"]["std"], rtol=1e-5)


def test_in_inches(tmp_path: Path, of_cloud: MassResult) -> None:
    scan = pebble.write_ply(tmp_path / "inch.ply", pebble.cloud() / 0.0254)
    settings = pebble.settings(noise_std="0.1 mm", noise_length="0 mm")
    found = scanmass.measure(scan, settings | {"scan": settings["scan"] | {"unit": "inch"}})
    # The same numbers but for rounding.
    assert found["volume_m3"]["value"] == pytest.approx(of_cloud["volume_m3"]["value"], rel=1e-8)
    np.testing.assert_allclose(center(found), center(of_cloud), atol=1e-10)
    assert (found["scans"][0]["unit"], found["scans"][0]["unit_from"]) == ("inch", "declared")


def test_turned_and_shuffled(tmp_path: Path, of_cloud: MassResult) -> None:
    rng = np.random.default_rng(1)
    turn, _ = np.linalg.qr(rng.normal(size=(3, 3)))
    turn *= np.sign(np.linalg.det(turn))
    points = 1000.0 * pebble.cloud()
    settings = pebble.settings(noise_std="0.1 mm", noise_length="0 mm")
    shuffled = scanmass.measure(pebble.write_ply(tmp_path / "s.ply", rng.permutation(points)), settings)
    turned = scanmass.measure(pebble.write_ply(tmp_path / "t.ply", points @ turn.T), settings)
    # Ties among neighbours fall otherwise: a hundredth of the stated standard deviation, 0.09 % of the volume.
    assert shuffled["volume_m3"]["value"] == pytest.approx(of_cloud["volume_m3"]["value"], rel=1e-5)
    np.testing.assert_allclose(center(shuffled), center(of_cloud), atol=1e-5 * SIZE)
    # The cells of the reconstruction lie otherwise: its own error (0.003 % seen) is drawn anew.
    assert turned["volume_m3"]["value"] == pytest.approx(of_cloud["volume_m3"]["value"], rel=2e-4)
    np.testing.assert_allclose(turn.T @ center(turned), center(of_cloud), atol=5e-5 * SIZE)
    np.testing.assert_allclose(turn.T @ inertia(turned) @ turn, inertia(of_cloud), atol=5e-4 * TRUE.principal[2])


def test_views_in_one_file_or_in_several(tmp_path: Path, of_views: MassResult) -> None:
    views = pebble.views()
    number = np.repeat(np.arange(4), [len(view) for view in views])
    scan = pebble.write_ply(tmp_path / "all.ply", 1000.0 * np.concatenate(views), number)
    one = scanmass.measure(scan, pebble.settings())
    # The same points in the same order: the same numbers.
    for name in ("volume_m3", "mass_kg", "center_of_mass_m", "inertia_kg_m2", "noise", "budget"):
        assert one[name] == of_views[name]
    assert [s["views"] for s in one["scans"]] == [4]
    assert [s["views"] for s in of_views["scans"]] == [1, 1, 1, 1]
    assert one["scans"][0]["points_used"] == sum(s["points_used"] for s in of_views["scans"]) == len(number)


def test_scale_acts_about_the_objects_own_centre(view_files: Sequence[Path], of_views: MassResult) -> None:
    points = {"points": {"top": "0 0 100 mm"}}
    plain = scanmass.measure(view_files, pebble.settings() | points)
    assert plain["volume_m3"] == of_views["volume_m3"]
    grown = scanmass.measure(view_files, pebble.settings(scale="1.01 ± 0.002") | points)
    assert grown["volume_m3"]["value"] == pytest.approx(1.01**3 * plain["volume_m3"]["value"], rel=1e-12)
    np.testing.assert_allclose(inertia(grown), 1.01**5 * inertia(plain), rtol=1e-9)
    # About the origin the centre would move by 1 % of its 31 mm; the object's centre lies within 2 mm of its mass.
    np.testing.assert_allclose(center(grown), center(plain), atol=0.01 * 0.002)
    # A true distance is 1.01 times the measured one, wherever the object's centre is.
    before, after = (r["center_of_mass_m"]["offsets"][0]["offset_m"] for r in (plain, grown))
    np.testing.assert_allclose(after["value"], 1.01 * np.array(before["value"]), rtol=1e-9)
    # ± 0.002 is two standard deviations, at 1.01: mass goes with the cube, an offset with the length itself.
    doubt = 0.001 / 1.01
    assert row(grown, "scale")["kind"] == "declared"
    assert row(grown, "scale")["mass_std_kg"] == pytest.approx(3.0 * doubt * grown["mass_kg"]["value"], rel=0.05)
    assert row(grown, "scale")["com_std_m"] == pytest.approx([0.0, 0.0, 0.0], abs=1e-12)
    expected = np.hypot(grown["center_of_mass_m"]["std"], doubt * np.abs(after["value"]))
    np.testing.assert_allclose(after["std"], expected, rtol=0.05)
    assert "scale-taken-as-exact" in codes(plain)
    assert "scale-taken-as-exact" not in codes(grown)


def test_height_and_offsets(scans: Path, of_mesh: MassResult) -> None:
    lowest = of_mesh.products.surface.vertices[:, 2].min()
    height = of_mesh["center_of_mass_m"]["height_above_base_m"]
    assert height["value"] == pytest.approx(center(of_mesh)[2] - lowest, abs=1e-12)
    # Nothing is in doubt but the density, which moves no centre.
    assert height["low"] == pytest.approx(height["high"], abs=1e-12)
    assert (of_mesh["frame"]["up"], of_mesh["frame"]["up_from"]) == ([0.0, 0.0, 1.0], "declared")
    settings = pebble.settings(noise_std="0 mm", scale="1 ± 0.002") | {"points": {"far": "-500 0 0 mm"}}
    offset = scanmass.measure(scans / "mesh.off", settings)["center_of_mass_m"]["offsets"][0]["offset_m"]
    np.testing.assert_allclose(offset["value"], center(of_mesh) + [0.5, 0.0, 0.0], atol=1e-12)
    # 0.1 % of half a metre, one standard deviation; the interval is the normal's central 95 %.
    assert offset["std"][0] == pytest.approx(0.001 * offset["value"][0], rel=0.05)
    assert offset["high"][0] - offset["value"][0] == pytest.approx(1.96 * offset["std"][0], rel=0.01)


def test_a_cloud_and_the_mesh_of_its_surface(of_cloud: MassResult, of_mesh: MassResult) -> None:
    # Faces of 6000 vertices cut off 0.12 % of the volume as chords; the cloud itself is within 0.003 %.
    assert of_mesh["volume_m3"]["value"] == pytest.approx(of_cloud["volume_m3"]["value"], rel=0.002)
    np.testing.assert_allclose(center(of_mesh), center(of_cloud), atol=0.0001)
    assert (of_mesh["surface"]["source"], of_cloud["surface"]["source"]) == ("mesh", "points")
    assert (of_mesh["surface"]["triangles"], of_mesh["surface"]["closed"]) == (2 * 6000 - 4, True)


def test_a_mesh_inside_out_is_turned_and_said(tmp_path: Path, of_mesh: MassResult) -> None:
    vertices, faces = pebble.mesh()
    scan = pebble.write_off(tmp_path / "inside_out.off", 1000.0 * vertices, faces[:, ::-1])
    found = scanmass.measure(scan, pebble.settings(noise_std="0 mm"))
    assert found["volume_m3"]["value"] == pytest.approx(of_mesh["volume_m3"]["value"], rel=1e-12)
    assert "inside-out" in codes(found) | codes(found, "warnings")
    assert "inside-out" not in codes(of_mesh) | codes(of_mesh, "warnings")


def test_where_the_noise_comes_from(scans: Path, view_files: Sequence[Path], of_views: MassResult) -> None:
    assert (of_views["noise"]["basis"], of_views["noise"]["views"]) == ("views", 4)
    assert "errors-common-to-all-views-not-seen" in codes(of_views)
    # Two views do not tell; nothing is declared: an upper bound, and so labelled.
    for paths in (view_files[:2], scans / "cloud.ply"):
        bounded = scanmass.measure(paths, pebble.settings())
        assert bounded["noise"]["basis"] == "upper_bound"
        assert "noise-upper-bound" in codes(bounded, "warnings")
    # What was planted is 0.1 mm a point, and the bound says so or more.
    assert bounded["noise"]["std_m"] > 1e-4
    assert bounded["volume_m3"]["low"] < TRUE.volume < bounded["volume_m3"]["high"]
    # Views tell what differs between them; what is declared beside them is what they share.
    both = scanmass.measure(view_files, pebble.settings(noise_std="0.1 mm", noise_length="30 mm"))
    assert both["noise"]["basis"] == "views"
    assert row(both, "declared noise common to all views")["kind"] == "declared"
    assert both["volume_m3"]["std"] > of_views["volume_m3"]["std"]


def test_declared_noise(of_cloud: MassResult) -> None:
    noise = of_cloud["noise"]
    assert (noise["basis"], noise["std_m"], noise["length_m"]) == ("declared", 1e-4, 0.0)


def test_a_certificate_through_the_chain(scans: Path, view_files: Sequence[Path], of_views: MassResult) -> None:
    certificate = {"PF": "0.4 mm", "PS": "0.2 mm", "E": "0.02 mm + L/10000", "length": "150 mm"}
    alone = scanmass.measure(scans / "cloud.ply", pebble.settings(certificate=certificate, noise_length="0 mm"))
    validate(alone.document)
    assert (alone["noise"]["basis"], alone["noise"]["declared_in"]) == ("declared", "certificate")
    assert alone["noise"]["std_m"] == pytest.approx(1e-4)
    assert alone["noise"]["more_scans"]["text"].startswith("Two more scans would measure the noise")
    assert "certificate-own-reading" in codes(alone)
    assert "scale-taken-as-exact" not in codes(alone)
    assert "beyond-certified-length" in codes(alone, "warnings")
    # E over the longest tested length: 0.02 / 150 + 1 / 10000 = 0.0002333 of a length, three times that of the mass.
    mass = alone["mass_kg"]["value"]
    assert row(alone, "scale")["mass_std_kg"] == pytest.approx(3 * (0.02 / 150 + 1e-4) / np.sqrt(3) * mass, rel=1e-6)
    offset = alone["surface"]["area_m2"] * 1e-4 / np.sqrt(3) * pebble.DENSITY
    assert row(alone, "surface offset")["mass_std_kg"] == pytest.approx(offset, rel=1e-6)
    # Views show their own noise: of the certificate only what all of them share is added.
    both = scanmass.measure(view_files, pebble.settings(certificate=certificate))
    assert (both["noise"]["basis"], both["noise"]["declared_in"]) == ("views", None)
    added = {r["source"] for r in both["budget"]} - {r["source"] for r in of_views["budget"]}
    assert added == {"scale", "surface offset"}
    assert row(both, "scan noise")["mass_std_kg"] == row(of_views, "scan noise")["mass_std_kg"]


def test_nothing_is_claimed_of_a_small_mesh_without_noise(tmp_path: Path) -> None:
    vertices, faces = pebble.mesh(300)
    scan = pebble.write_off(tmp_path / "small.off", 1000.0 * vertices, faces)
    found = scanmass.measure(scan, pebble.settings())
    validate(found.document)
    assert found["noise"]["basis"] == "none"
    assert "noise-unknown" in codes(found, "warnings")
    for name in ("volume_m3", "mass_kg", "center_of_mass_m", "inertia_kg_m2"):
        assert found[name]["value"] is not None
        assert [found[name][end] for end in ("std", "low", "high")] == [None, None, None]
    assert found["center_of_mass_m"]["region"] is None
    assert [p["cone_deg"] for p in found["principal"]] == [None, None, None]
    assert found.products.replicates == {}


def test_a_file_and_a_dict_say_the_same(tmp_path: Path, scans: Path, of_mesh: MassResult) -> None:
    text = """
scan: {unit: mm, noise_std: 0 mm, up: 0 0 1}
clean: {support: none}
surface: {underside: seen}
inside: {body: {density: 2000 ± 40 kg/m3}}
bounds: {replicates: 400}
"""
    (tmp_path / "pebble.yaml").write_text(text, encoding="utf-8")
    assert scanmass.measure(scans / "mesh.off", tmp_path / "pebble.yaml").to_json() == of_mesh.to_json()
    # The effective settings, fed back, are the same settings.
    (tmp_path / "again.yaml").write_text(of_mesh.pipeline_text, encoding="utf-8")
    assert scanmass.measure(scans / "mesh.off", tmp_path / "again.yaml").to_json() == of_mesh.to_json()


def test_progress_and_silence(
    scans: Path, view_files: Sequence[Path], capfd: pytest.CaptureFixture[str], of_views: MassResult
) -> None:
    for paths, stages in (
        (view_files, ["read", "points", "separate", "normals", "reconstruct", "refine", "close", "weigh"]),
        (scans / "mesh.off", ["read", "mesh", "weigh"]),
    ):
        said: list[tuple[str, int, int]] = []
        scanmass.measure(paths, pebble.settings(noise_std="0 mm"), progress=lambda *now, said=said: said.append(now))
        assert list(dict.fromkeys(stage for stage, _, _ in said)) == stages
        for stage in stages:
            steps = [(done, total) for name, done, total in said if name == stage]
            assert steps == sorted(steps)
            assert len({total for _, total in steps}) == 1
            assert steps[-1][0] == steps[-1][1]
    assert capfd.readouterr() == ("", "")


def one_sided(folder: Path) -> Path:
    u = pebble.directions(9000)
    u = u[u @ pebble.VIEWS[0] > 0.4]
    return pebble.write_ply(folder / "side.ply", 1000.0 * u * pebble.radius(u)[:, None])


def two_pebbles(folder: Path) -> Path:
    points = pebble.cloud()
    return pebble.write_ply(folder / "two.ply", 1000.0 * np.concatenate([points, points + [0.5, 0.0, 0.0]]))


def few(folder: Path) -> Path:
    return pebble.write_ply(folder / "few.ply", 1000.0 * pebble.cloud(499))


@pytest.mark.parametrize(
    ("scan", "fault", "text"),
    [
        (
            one_sided,
            Declined,
            r"the scan is one-sided: 4\d % of all directions look at surface that was not seen; scan the other sides "
            r"too, or declare scan\.up and surface\.underside \(flat or hollow\)",
        ),
        (
            two_pebbles,
            ScanFault,
            r"the scan holds 2 separate objects of similar size \(240\.\d mm, 240\.\d mm\); give one object a scan: "
            r"crop the others away",
        ),
        (few, ScanFault, r"few\.ply: the scan holds 499 usable points; at least 500 are needed, unless it is a closed"),
    ],
)
def test_scans_that_cannot_be_measured(scan: Any, fault: type[UserFault], text: str, tmp_path: Path) -> None:
    with pytest.raises(fault, match=f"^{text}"):
        scanmass.measure(scan(tmp_path), pebble.settings())


def test_units_are_never_guessed(scans: Path) -> None:
    settings = pebble.settings()
    del settings["scan"]["unit"]
    text = (
        r"^cloud\.ply: the file does not say its unit; its largest side is 240\.\d mm if in mm, 240\.\d m if in m, "
        r"6\.1\d+ m if in inch; give --unit, or scan\.unit in the pipeline file$"
    )
    with pytest.raises(ScanFault, match=text):
        scanmass.measure(scans / "cloud.ply", settings)
    with pytest.raises(PipelineFault, match=r"^options: scan\.unit: 'inch' is given, and the file says 'mm'; "):
        scanmass.measure(scans / "cloud.ply", pebble.settings(), unit="inch")


def test_every_fault_of_a_pipeline_at_once(tmp_path: Path, scans: Path) -> None:
    path = tmp_path / "wrong.yaml"
    path.write_text("scan: {unit: furlong}\nbogus: 1\ninside:\n  body: {density: '1,5 g/cm3'}\n", encoding="utf-8")
    with pytest.raises(PipelineFault) as raised:
        scanmass.measure(scans / "cloud.ply", path)
    where = [line.removeprefix(str(path)).split(": ")[0:2] for line in raised.value.faults]
    assert where == [[":1", "scan.unit"], [":2", "bogus"], [":4", "inside.body.density"]]
    assert str(raised.value).count("\n") == 2
