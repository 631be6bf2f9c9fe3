"""Anisotropy of the Reynolds stress: barycentric weights (Banerjee et al. 2007) and Lumley invariants of known tensors.

Limits are exact; the shear tensor is that of the atmospheric wall layer, σ_u : σ_v : σ_w = 2.40 : 1.90 : 1.25 u* with
⟨u'w'⟩ = -u*² (Panofsky & Dutton 1984, ratios seen in one text only); its invariants were computed independently for the project's
physics sheet.
"""

from __future__ import annotations

import numpy as np
import pytest

from lespost.regime.anisotropy import anisotropy, tensor


def of(matrix: list[list[float]]) -> tuple[float, float, float]:
    found = anisotropy(np.array(matrix, float))
    return float(found.one_component), float(found.two_component), float(found.isotropic)


@pytest.mark.parametrize(
    ("diagonal", "weights", "eta", "xi"),
    [((1, 1, 1), (0, 0, 1), 0.0, 0.0), ((1, 0, 0), (1, 0, 0), 1 / 3, 1 / 3), ((1, 1, 0), (0, 1, 0), 1 / 6, -1 / 6)],
)
def test_limits(diagonal: tuple[float, ...], weights: tuple[float, ...], eta: float, xi: float) -> None:
    found = anisotropy(np.diag(np.array(diagonal, float)))
    np.testing.assert_allclose([found.one_component, found.two_component, found.isotropic], weights, atol=1e-12)
    assert float(found.eta) == pytest.approx(eta, abs=1e-12)
    assert float(found.xi) == pytest.approx(xi, abs=1e-8)


def test_wall_layer_tensor() -> None:
    found = anisotropy(tensor(*(np.array(x) for x in (5.76, 3.61, 1.5625, 0.0, -1.0, 0.0))))
    np.testing.assert_allclose([found.one_component, found.two_component, found.isotropic], [0.217339, 0.415927, 0.366733], atol=1e-5)
    assert float(found.eta) == pytest.approx(0.122784, abs=1e-5)
    assert float(found.xi) == pytest.approx(0.041342, abs=1e-5)


def test_convective_and_langmuir_tensors() -> None:
    """diag(.12, .12, .4) is of one-component kind, diag(1, 2, 2) of two-component kind (exact)."""
    np.testing.assert_allclose(of([[0.12, 0, 0], [0, 0.12, 0], [0, 0, 0.4]]), (0.4375, 0.0, 0.5625), atol=1e-12)
    np.testing.assert_allclose(of([[1, 0, 0], [0, 2, 0], [0, 0, 2]]), (0.0, 0.4, 0.6), atol=1e-12)
    assert float(anisotropy(np.diag([0.12, 0.12, 0.4])).xi) > 0 > float(anisotropy(np.diag([1.0, 2.0, 2.0])).xi)


def test_weights_of_any_tensor_sum_to_one_and_stay_within() -> None:
    rng = np.random.default_rng(0)
    root = rng.standard_normal((200, 3, 3))
    found = anisotropy(root @ np.swapaxes(root, -1, -2))
    weights = np.stack([found.one_component, found.two_component, found.isotropic])
    np.testing.assert_allclose(weights.sum(axis=0), 1.0, atol=1e-12)
    assert (weights >= -1e-12).all()
    np.testing.assert_allclose(found.eigenvalues.sum(axis=-1), 0.0, atol=1e-12)


def test_the_axis_of_least_variance_is_found() -> None:
    """Langmuir cells along 30°: the eigenvector of the smallest eigenvalue points along the cells."""
    c, s = np.cos(np.radians(30.0)), np.sin(np.radians(30.0))
    turn = np.array([[c, -s, 0], [s, c, 0], [0, 0, 1]])
    vector = anisotropy(turn @ np.diag([1.0, 2.0, 2.0]) @ turn.T).eigenvectors[:, 2]
    assert np.degrees(np.arctan2(vector[1], vector[0])) % 180.0 == pytest.approx(30.0, abs=1e-9)


def test_no_turbulence_has_no_anisotropy() -> None:
    assert np.isnan(anisotropy(np.zeros((3, 3))).one_component)
