import numpy as np
import pytest

from bnx.coarsening import coarsen, needs_coarsening
from bnx.domains import Domain
from bnx.errors import SettingError


def test_pooling_keeps_the_most_frequent_levels():
    fine = Domain("a", ("p", "q", "(other)", "r", "s", "(blank)"), blank=True)
    counts = np.array([[1, 1], [5, 0], [0, 2], [0, 2], [0, 0], [3, 3]])
    coarse = coarsen(fine, counts, "mdl", 2)
    assert coarse.domain == Domain("a", ("p", "q", "(other 2)", "(blank)"), pooled=True, blank=True)
    assert coarse.codes.tolist() == [0, 1, 2, 2, 2, 3]
    assert coarsen(fine, counts, "mdl", 5).domain == fine
    assert needs_coarsening(fine, 4)
    assert not needs_coarsening(fine, 5)
    pooled = Domain("a", ("p", "q", "r", "(other)"), pooled=True)
    again = coarsen(pooled, np.array([[1], [2], [3], [9]]), "mdl", 1)
    assert again.domain == Domain("a", ("r", "(other)"), pooled=True)
    assert again.codes.tolist() == [1, 1, 0, 1]


def test_numeric_coarsening_keeps_blanks_apart():
    fine = Domain("x", ("<= 1", "1 to 2", "2 to 3", "> 3", "(blank)"), numeric=True, cuts=(1.0, 2.0, 3.0), blank=True)
    counts = np.array([[30, 0], [30, 0], [0, 30], [0, 30], [9, 9]])
    coarse = coarsen(fine, counts, "mdl", 50)
    assert coarse.domain == Domain("x", ("<= 2", "> 2", "(blank)"), numeric=True, cuts=(2.0,), blank=True)
    assert coarse.codes.tolist() == [0, 0, 1, 1, 2]
    nothing = coarsen(fine, counts * 0, "frequency:4", 50)
    assert nothing.domain == Domain("x", ("any", "(blank)"), numeric=True, blank=True)
    assert nothing.codes.tolist() == [0, 0, 0, 0, 1]
    with pytest.raises(SettingError) as caught:
        coarsen(fine, counts, "auto", 50)
    assert str(caught.value) == (
        "--bins: 'auto' cannot be used here; give one way to cut: mdl, frequency:K, width:K or mdl+frequency:K"
    )


def test_equal_frequencies_stand_in_only_where_mdl_makes_no_cut():
    fine = Domain("x", ("<= 1", "1 to 2", "2 to 3", "> 3", "(blank)"), numeric=True, cuts=(1.0, 2.0, 3.0), blank=True)
    parted = np.array([[30, 0], [30, 0], [0, 30], [0, 30], [9, 9]])
    alike = np.array([[10, 10], [10, 10], [10, 10], [10, 10], [9, 9]])
    assert coarsen(fine, parted, "mdl+frequency:4", 50).domain == coarsen(fine, parted, "mdl", 50).domain
    assert coarsen(fine, alike, "mdl", 50).domain.cuts == ()
    assert coarsen(fine, alike, "mdl+frequency:4", 50).domain.cuts == (1.0, 2.0, 3.0)
    assert coarsen(fine, alike, "mdl+frequency:2", 50).domain.cuts == (2.0,)
    assert coarsen(fine, alike * [[1], [0], [0], [0], [1]], "mdl+frequency:2", 50).domain.cuts == ()
