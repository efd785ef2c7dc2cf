"""Fractal aggregates obey their scaling law and touch without overlap."""

import numpy as np
import pytest
from scipy.spatial.distance import pdist, squareform

import shapes
from shapes import ShapeError
from shapes.aggregate import aggregate_centres


@pytest.mark.parametrize(("dimension", "prefactor"), [(1.6, 1.4), (1.8, 1.3), (2.2, 1.0)])
@pytest.mark.parametrize("seed", [0, 1])
def test_scaling_law_holds_and_spheres_touch(dimension: float, prefactor: float, seed: int) -> None:
    count = 120
    centres = aggregate_centres(count, dimension, prefactor, seed)
    spread = ((centres - centres.mean(axis=0)) ** 2).sum() / count
    gyration = np.sqrt(spread + 3 / 5)
    assert prefactor * gyration**dimension == pytest.approx(count, rel=1e-6)
    apart = squareform(pdist(centres)) + 10 * np.eye(count)
    nearest = apart.min(axis=1)
    assert nearest.min() >= 2 - 1e-8  # none overlap
    assert nearest.max() <= 2 + 1e-8  # each touches one
    # connected: walking along contacts reaches all
    contact = apart < 2 + 1e-8
    reached = np.zeros(count, bool)
    reached[0] = True
    for _ in range(count):
        reached |= contact[reached].any(axis=0)
    assert reached.all()


def test_denser_clusters_are_smaller() -> None:
    sizes = [np.ptp(aggregate_centres(100, d, 1.2, 5), axis=0).max() for d in (1.6, 2.3)]
    assert sizes[1] < 0.7 * sizes[0]


def test_particle_has_the_volume_of_its_spheres() -> None:
    particle = shapes.aggregate(30, 10, seed=2)
    assert particle.volume() == pytest.approx(30 * np.pi / 6 * 1000)
    assert np.allclose(sum(particle.bounds), 0)  # centred
    apart = shapes.aggregate(30, 10, gap=1.0, seed=2)
    assert apart.gap == 1.0
    # the same cluster, stretched by 11/10 between centres
    assert np.allclose(apart.extent - 10, 1.1 * (particle.extent - 10))
    fused = shapes.aggregate(30, 10, gap=-1.0, seed=2)
    assert fused.gap is None
    assert fused.volume() < particle.volume()


@pytest.mark.parametrize("number", [1, 2, 3, 5])
def test_few_spheres(number: int) -> None:
    assert shapes.aggregate(number, 10).volume() == pytest.approx(number * np.pi / 6 * 1000)


def test_laws_that_cannot_be_kept() -> None:
    with pytest.raises(ShapeError, match="no aggregate of 50"):
        shapes.aggregate(50, 10, dimension=3.0, prefactor=20.0)
