"""The table and the picture of scattered light, read back."""

import csv
import io

import numpy as np
import pytest

from dda.report.scattering import draw_scattering, scattering_table
from dda.response.mueller import mueller_matrix
from dda.study.rows import Row

ANGLES = np.array([0.0, 60, 90, 180])
K, VOLUME = 0.015, 4000.0


def dipole(azimuths=(0.0,)):
    """Rayleigh scattering of a polarizability of so many nm^3 (Bohren & Huffman, section 5.2)."""
    cosine = np.cos(np.deg2rad(ANGLES))
    j = np.zeros((len(azimuths), len(ANGLES), 2, 2), complex)
    j[..., 0, 0], j[..., 1, 1] = -1j * K**3 * VOLUME * cosine, -1j * K**3 * VOLUME
    m = mueller_matrix(j)
    return {
        "scattering/k": np.array(K),
        "scattering/angles": ANGLES,
        "scattering/azimuths": np.array(azimuths),
        "scattering/mueller": m,
        "scattering/dc_sca": m[..., 0, 0] / K**2,
        "scattering/dc_sca_error": 0.1 * m[..., 0, 0] / K**2,
        "scattering/phase_function": 0.75 * np.broadcast_to(1 + cosine**2, m.shape[:2]),
    }


def read(text):
    return list(csv.DictReader(io.StringIO(text)))


def test_the_table_of_a_dipole():
    points = [
        (Row(500.0, varied={"particle.edge": 40}), dipole((0.0, 90.0))),
        (Row(510.0, varied={"particle.edge": 50}), dipole()),
        (Row(520.0), {"levels/spacing": np.ones(1)}),  # asked for no angles
    ]
    rows = read(scattering_table(points))
    assert len(rows) == 3 * len(ANGLES)
    assert list(rows[0])[:4] == ["wavelength_nm", "particle.edge", "azimuth_deg", "angle_deg"]
    assert list(rows[0])[-1] == "s44"
    assert {row["particle.edge"] for row in rows} == {"40", "50"}
    at_60, at_90 = rows[1], rows[2]
    assert float(at_60["s12"]) == pytest.approx((0.25 - 1) / (0.25 + 1))
    assert float(at_60["s33"]) == pytest.approx(2 * 0.5 / (0.25 + 1))
    assert float(at_60["s11"]) == pytest.approx(0.75 * 1.25)
    assert at_60["s13"] == "0"
    assert float(at_90["s12"]) == pytest.approx(-1)
    assert at_90["s33"] == "0"  # cos 90 degrees is zero to rounding only
    cross = K**4 * VOLUME**2 * (1 + 0.25) / 2
    assert float(at_60["dc_sca_nm2_per_sr"]) == pytest.approx(cross)
    assert float(at_60["dc_sca_error_nm2_per_sr"]) == pytest.approx(0.1 * cross)


def test_nothing_makes_no_table_and_no_picture(tmp_path):
    points = [(Row(520.0), {"levels/spacing": np.ones(1)})]
    assert scattering_table(points) == ""
    assert not draw_scattering(tmp_path / "no.png", points, "nothing")
    assert not list(tmp_path.iterdir())


def test_an_error_that_is_not_known_is_empty():
    arrays = dipole()
    arrays["scattering/dc_sca_error"] = np.full((1, len(ANGLES)), np.nan)
    assert read(scattering_table([(Row(500.0), arrays)]))[0]["dc_sca_error_nm2_per_sr"] == ""


@pytest.mark.parametrize("azimuths", [(0.0,), (0.0, 45.0, 90.0)])
def test_the_picture_has_a_curve_for_each_azimuth_or_wavelength(azimuths, tmp_path):
    from matplotlib.image import imread

    points = [(Row(w, c_ext_nm2=c), dipole(azimuths)) for w, c in ((500.0, 1.0), (520.0, 2.0))]
    points[1][1]["scattering/mueller"] = 2 * points[1][1]["scattering/mueller"]
    assert draw_scattering(tmp_path / "s.png", iter(points), "dipole")
    image = (imread(tmp_path / "s.png")[..., :3] * 255).round().astype(int)
    colours = {tuple(c) for c in image.reshape(-1, 3)}
    orange, green = (0xD5, 0x5E, 0x00), (0x00, 0x9E, 0x73)
    assert orange in colours  # the second curve: 520 nm, or 45 degrees
    assert green not in colours  # there is no fourth one
