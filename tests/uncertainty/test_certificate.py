"""A certificate read by hand: PF / 4, PS / 2 over root 3, E / L over root 3 (own reading; no norm lays it down)."""

import numpy as np
import pytest
import trimesh

from scanmass.doubt import Figure
from scanmass.errors import Declined
from scanmass.uncertainty import patches
from scanmass.uncertainty.bounds import bound
from scanmass.uncertainty.certificate import Certificate, LengthLimit
from scanmass.uncertainty.declared import Declared
from scanmass.uncertainty.reading import offset_terms, read_certificate
from scanmass.uncertainty.sources import Parts

WHOLE = Certificate(form=4e-4, size=6e-4, length_error=LengthLimit(6e-5, 20_000), longest=0.5)


def test_the_range_of_25_deviations_is_about_four_of_them():
    # Tippett 1925: the mean range of 25 normal deviations is 3.931 standard deviations.
    draws = np.random.default_rng(1).normal(size=(200_000, 25))
    assert np.ptp(draws, axis=1).mean() == pytest.approx(3.931, abs=0.01)
    assert Certificate(form=0.3931).noise_std == pytest.approx(0.1, rel=0.02)


def test_every_figure_by_hand():
    # An object 0.4 m long: E(0.4 m) = 0.06 + 400 / 20000 = 0.08 mm, that is 0.0002 of its length.
    found = read_certificate(WHOLE, Declared(noise_length=0.02), 0.4)
    read = found.declared
    assert (read.noise_std, read.noise_length, read.noise_from_certificate) == (1e-4, 0.02, True)
    assert read.scale is not None
    assert read.scale.spread == "uniform"
    assert read.scale.value == pytest.approx(1.0)
    assert read.scale.std == pytest.approx(0.0002 / np.sqrt(3), rel=1e-9)
    assert read.offset_std == pytest.approx(3e-4 / np.sqrt(3))
    assert [n.code for n in found.assumptions] == ["certificate-own-reading"]
    for said in ("0.1 mm (PF / 4", "0.02 % (E / L", "0.3 mm (PS / 2)", "which no norm lays down"):
        assert said in found.assumptions[0].text
    assert found.warnings == ()


@pytest.mark.parametrize(
    ("certificate", "size", "limit"),
    [
        (Certificate(length_error=LengthLimit(1e-4)), 0.5, 2e-4),
        (Certificate(length_error=LengthLimit(0.0, 10_000)), 3.0, 1e-4),
        # Longer than what was tested: the ratio at 0.5 m, (0.06 + 0.025) / 500, which is above that at 2 m.
        (WHOLE, 2.0, 1.7e-4),
        # Of SD and E the larger.
        (Certificate(spacing=LengthLimit(5e-5), length_error=LengthLimit(8e-5)), 0.4, 2e-4),
        (Certificate(spacing=LengthLimit(9e-5), length_error=LengthLimit(8e-5)), 0.3, 3e-4),
    ],
)
def test_scale_over_the_objects_own_length(certificate, size, limit):
    assert certificate.scale_limit(size) == pytest.approx(limit)


def test_an_object_beyond_the_test_is_warned_of():
    (warning,) = read_certificate(WHOLE, Declared(), 2.0).warnings
    assert warning.code == "beyond-certified-length"
    assert "2e+03" not in warning.text
    assert "The object is 2000 mm long, but the scanner was tested over 500 mm only" in warning.text


def test_what_the_file_declares_itself_wins_and_is_said():
    own = Declared(2e-4, 0.01, Figure.normal(1.001, 1e-4))
    found = read_certificate(WHOLE, own, 0.4)
    assert (found.declared.noise_std, found.declared.scale) == (2e-4, own.scale)
    assert not found.declared.noise_from_certificate
    used, unused = found.assumptions
    assert "PS / 2" in used.text
    assert "PF" not in used.text
    assert unused.code == "certificate-figure-not-used"
    assert "PF / 4" in unused.text
    assert "E / L" in unused.text


def test_a_slip_of_units_is_declined():
    with pytest.raises(Declined, match="lengths of 400 mm, the object's own, to be off by 15 %; check E and SD"):
        read_certificate(Certificate(length_error=LengthLimit(0.06)), Declared(), 0.4)


def test_a_shift_of_the_surface_is_area_times_shift(surface_of):
    radius, std = 0.5, 1e-4
    ball = patches.make(surface_of(trimesh.creation.icosphere(5, radius)), None, centre=np.zeros(3))
    parts = Parts.make(np.zeros((1, 10)), [Figure.exact(1.0)])
    (term,) = offset_terms(ball, Declared(offset_std=std), parts)
    assert (term.kind, term.rows.shape, term.degrees_of_freedom) == ("declared", (1, 1, 10), None)
    volume = 4 / 3 * np.pi * radius**3
    # REFERENCES 4: a sphere gains 3 d / R. The mesh has 0.1 % less area than the sphere.
    assert term.rows[0, 0, 0] / volume == pytest.approx(3 * std / radius, rel=2e-3)
    # Alike on all sides: the centre stays.
    assert np.abs(term.rows[0, 0, 1:4]).max() < 1e-9 * term.rows[0, 0, 0]
    assert offset_terms(ball, Declared(), parts) == []


def _budget(found):
    return {row.source: row for row in found.budget}


def test_rows_of_the_budget(surface_of):
    """A mesh ball of 1000 kg/m3: scale 3 e V, offset A d, noise as declared; E alone gives no noise."""
    ball = trimesh.creation.icosphere(4, 0.5)
    surface = surface_of(ball, source="mesh")
    moments = np.array([[ball.volume, 0, 0, 0, *[ball.volume * 0.05] * 3, 0, 0, 0]])
    density = [Figure.exact(1000.0)]
    size = float(np.ptp(ball.vertices, axis=0).max())
    read = read_certificate(WHOLE, Declared(noise_length=0.05), size)
    rows = _budget(bound(surface, None, densities=density, part_moments=moments, declared=read.declared))
    limit = (6e-5 + 0.5 / 20_000) / 0.5
    assert rows["scale"].mass_std == pytest.approx(3 * limit / np.sqrt(3) * ball.volume * 1000, rel=1e-6)
    assert rows["surface offset"].mass_std == pytest.approx(ball.area * 3e-4 / np.sqrt(3) * 1000, rel=1e-6)
    alone = _budget(bound(surface, None, densities=density, part_moments=moments, declared=Declared(1e-4, 0.05)))
    assert rows["scan noise"].mass_std == pytest.approx(alone["scan noise"].mass_std, rel=1e-9)
    only = read_certificate(Certificate(length_error=LengthLimit(1e-4)), Declared(), size)
    found = bound(surface, None, densities=density, part_moments=moments, declared=only.declared)
    assert (found.noise.basis, found.budget) == ("none", ())
    assert found.mass.low is None
