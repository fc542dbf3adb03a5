"""Published tables and the figures that belong to them, each with its source."""

from itertools import product

import numpy as np

# Bickel, Hammel & O'Connell 1975, "Sex bias in graduate admissions", Science 187; departments A to F of Berkeley, 1973.
# Per department: men admitted, men rejected / women admitted, women rejected.
BERKELEY = np.array(
    [
        [[512, 313], [89, 19]],
        [[353, 207], [17, 8]],
        [[120, 205], [202, 391]],
        [[138, 279], [131, 244]],
        [[53, 138], [94, 299]],
        [[22, 351], [24, 317]],
    ]
)
BERKELEY_X2 = 19.9384  # given department, df 6
BERKELEY_G = 21.7355  # Agresti prints 21.7 (from memory)
BERKELEY_MARGINAL_X2 = 92.2053
BERKELEY_MARGINAL_G = 93.4494

# Agresti 2002, Categorical Data Analysis, job satisfaction (columns) by income (rows), women then men.
# The figures were recomputed, not printed there.
JOB_SATISFACTION = np.array(
    [
        [[1, 3, 11, 2], [2, 3, 17, 3], [0, 1, 8, 5], [0, 2, 4, 2]],
        [[1, 1, 2, 1], [0, 3, 5, 1], [0, 0, 7, 3], [0, 1, 9, 6]],
    ]
)
JOB_SATISFACTION_X2 = 21.0545  # given gender, df 18
JOB_SATISFACTION_G = 19.3684
JOB_SATISFACTION_MIN_EXPECTED = 0.125

# Snee 1974, The American Statistician 28; the split by sex is Friendly's, as in R's HairEyeColor (592 persons).
# Men then women; hair black, brown, red, blond by eye brown, blue, hazel, green.
HAIR_EYE = np.array(
    [
        [[32, 11, 10, 3], [53, 50, 25, 15], [10, 10, 7, 7], [3, 30, 5, 8]],
        [[36, 9, 5, 2], [66, 34, 29, 14], [16, 7, 7, 7], [4, 64, 5, 8]],
    ]
)
HAIR_EYE_X2 = 147.9440  # given sex, df 18
HAIR_EYE_G = 156.6779
HAIR_EYE_NATS = 0.132329

# scipy documentation of chi2_contingency (df 2) and of its log-likelihood variant.
SCIPY_TABLE = np.array([[10, 10, 20], [20, 20, 20]])
SCIPY_X2, SCIPY_X2_P = 2.77778, 0.249352
SCIPY_G, SCIPY_G_P = 2.768859, 0.250467

# scipy documentation of scipy.stats.contingency.association.
ASSOCIATION_TABLE = np.array([[100, 150], [203, 322], [420, 700], [320, 210]])
ASSOCIATION_V = 0.186178

# Benjamini & Hochberg 1995, section 3.2 (15 hypotheses): at .05 the procedure rejects 4, Bonferroni 3.
BENJAMINI_HOCHBERG_P = np.array(
    [
        *(0.0001, 0.0004, 0.0019, 0.0095, 0.0201, 0.0278, 0.0298, 0.0344),
        *(0.0459, 0.3240, 0.4262, 0.5719, 0.6528, 0.7590, 1.0000),
    ]
)

# Derived from the definition of corral below, by hand and by computer.
CORRAL_WITHIN_NATS = 0.116833  # A0 with A1, B0 with B1, given the class
CORRAL_ACROSS_NATS = 0.051427  # the four cross pairs
CORRAL_WITHIN_G = 29.9092  # df 2

# Derived from the definition of MONK-1 below.
MONK1_NATS = 0.318257  # a1 with a2 given the class; no other pair depends


def corral() -> tuple[np.ndarray, np.ndarray]:
    """Build corral: 128 rows of A0 A1 B0 B1 Irrelevant Correlated, and the class (A0 and A1) or (B0 and B1).

    Source: John, Kohavi & Pfleger 1994; here deterministic: the 32 combinations, four copies each, Correlated equal to
    the class but wrong in the last copy.
    """
    bits = np.array([row for row in product((0, 1), repeat=5) for _ in range(4)])
    target = (bits[:, 0] & bits[:, 1]) | (bits[:, 2] & bits[:, 3])
    correlated = np.where(np.arange(128) % 4 == 3, 1 - target, target)
    return np.column_stack([bits, correlated]), target


def monk1() -> tuple[np.ndarray, np.ndarray]:
    """Build MONK-1: all 432 rows of a1 to a6, coded from 0, and the class (a1 = a2, or a5 is its first level).

    Source: Thrun et al. 1991.
    """
    rows = np.array(list(product(*(range(size) for size in (3, 3, 2, 3, 4, 2)))))
    return rows, ((rows[:, 0] == rows[:, 1]) | (rows[:, 4] == 0)).astype(np.int64)
