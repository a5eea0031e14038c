"""The classification-error matrix on an example worked by hand."""

from __future__ import annotations

import numpy as np
import pytest

from bayeslca.exceptions import ModelError
from bayeslca.relate.error_matrix import error_matrix

# Four cases, two classes, worked by hand from the formulas of Bolck, Croon & Hagenaars (2004) as
# written by Vermunt (2010), equations 6 and 11:
#   memberships 0.9, 0.8, 0.4, 0.1 of the first class; expected cases 2.2 and 1.8
#   placed modally in 1, 1, 2, 2
#   share[1, 1] = (0.9 + 0.8) / 2.2 = 17/22, share[2, 1] = (0.1 + 0.2) / 1.8 = 1/6
#   determinant = 17/22 * 5/6 - 5/22 * 1/6 = 80/132 = 20/33
MEMBERSHIP = np.array([[0.9, 0.1], [0.8, 0.2], [0.4, 0.6], [0.1, 0.9]])
SHARE = np.array([[17 / 22, 5 / 22], [1 / 6, 5 / 6]])
INVERSE = np.array([[5 / 6, -5 / 22], [-1 / 6, 17 / 22]]) * 33 / 20


def test_worked_example_of_two_classes() -> None:
    found = error_matrix(MEMBERSHIP)
    np.testing.assert_allclose(found.share[0], SHARE)
    np.testing.assert_allclose(found.class_share[0], [0.55, 0.45])
    np.testing.assert_allclose(found.inverse_weights, INVERSE[[0, 0, 1, 1]])
    np.testing.assert_allclose(found.inverse_weights[0], [1.375, -0.375])
    np.testing.assert_allclose(found.log_likelihood, np.log(SHARE.T[[0, 0, 1, 1]]))
    # Weights of a case sum to 1, and those of a class to its expected cases.
    np.testing.assert_allclose(found.inverse_weights.sum(axis=1), 1.0)
    np.testing.assert_allclose(found.inverse_weights.sum(axis=0), [2.2, 1.8])


def test_placed_in_proportion() -> None:
    found = error_matrix(MEMBERSHIP, by="proportional")
    # share[1, 1] = (0.81 + 0.64 + 0.16 + 0.01) / 2.2
    np.testing.assert_allclose(found.share[0, 0, 0], 1.62 / 2.2)
    np.testing.assert_allclose(found.inverse_weights.sum(axis=0), [2.2, 1.8])
    with pytest.raises(ModelError, match="placed in shares"):
        _ = found.log_likelihood


def test_mean_log_mixture() -> None:
    joint = np.log([[0.3, 0.2], [0.1, 0.4], [0.2, 0.2], [0.5, 0.1]])
    modal = error_matrix(MEMBERSHIP)
    np.testing.assert_allclose(
        modal.mean_log_mixture(joint),
        np.log(np.exp(joint + modal.log_likelihood).sum(axis=1)),
    )
    shared = error_matrix(MEMBERSHIP, by="proportional")
    by_hand = np.log(np.exp(joint) @ shared.share[0])  # (case, placed)
    np.testing.assert_allclose(shared.mean_log_mixture(joint), (MEMBERSHIP * by_hand).sum(axis=1))


def test_sure_memberships_have_no_error() -> None:
    sure = np.eye(3)[[0, 1, 2, 2]]
    found = error_matrix(sure)
    np.testing.assert_allclose(found.share[0], np.eye(3))
    np.testing.assert_allclose(found.inverse_weights, sure)


def test_counts_stand_for_cases_and_groups_have_their_own_matrix() -> None:
    doubled = error_matrix(np.repeat(MEMBERSHIP, [1, 2, 1, 3], axis=0))
    counted = error_matrix(MEMBERSHIP, counts=np.array([1, 2, 1, 3]))
    np.testing.assert_allclose(counted.share, doubled.share)
    both = np.concatenate([MEMBERSHIP, np.eye(2)[[0, 1]]])
    grouped = error_matrix(both, group=np.array([0, 0, 0, 0, 1, 1]))
    np.testing.assert_allclose(grouped.share[0], SHARE)
    np.testing.assert_allclose(grouped.share[1], np.eye(2))
    np.testing.assert_allclose(grouped.inverse_weights[4:], np.eye(2))


def test_refusals() -> None:
    with pytest.raises(ModelError, match="cannot be inverted"):
        _ = error_matrix(np.full((4, 2), 0.5)).inverse_weights
    with pytest.raises(ModelError, match="no expected case"):
        error_matrix(np.array([[1.0, 0.0], [1.0, 0.0]]))
    with pytest.raises(ModelError, match="'modal' or by 'proportional'"):
        error_matrix(MEMBERSHIP, by="randomly")  # type: ignore[arg-type]
