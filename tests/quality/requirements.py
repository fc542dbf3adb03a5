"""What is required of probabilities, each with the value measured on the open tables."""

from collections.abc import Mapping
from dataclasses import dataclass
from statistics import geometric_mean, median
from typing import Any

from quality.rival_models import BOOSTING, LOGISTIC, NAIVE

__all__ = ["LIMITS", "Requirement", "every_score", "ratio", "ratios", "requirements"]

Figures = dict[str, Any]
LIMITS = {NAIVE: 0.50, LOGISTIC: 0.75, BOOSTING: 1.07}
SINGLE = {"tic_tac_toe": 0.12, "monk2": 0.58}
_ADDED = 0.01  # nats, so that a table which is all but certain does not decide a mean
_MIX_MEAN, _MIX_WORST = 0.99, 1.05
_WORSE, _CALIBRATED, _SLOPES, _ERRORS = 2, 0.85, (0.85, 1.15), 50


@dataclass(frozen=True)
class Requirement:
    """One requirement, its ``bound`` and what was ``measured`` in words; ``failing``: the tables that speak against."""

    text: str
    bound: str
    measured: str
    met: bool
    failing: tuple[str, ...] = ()

    def row(self) -> str:
        """Give the requirement as a row of a table."""
        tables = f" ({', '.join(self.failing)})" if self.failing else ""
        return f"| {self.text} | {self.bound} | {self.measured}{tables} | {'met' if self.met else '**missed**'} |"


def ratio(loss: float, other: float) -> float:
    """Compare two log losses in nats."""
    return (loss + _ADDED) / (other + _ADDED)


def ratios(figures: Mapping[str, Figures], rival: str) -> dict[str, float]:
    """Compare the honest choice of every table with a rival."""
    return {name: ratio(_honest(one), one["rivals"]["models"][rival]["log_loss"]) for name, one in figures.items()}


def requirements(figures: Mapping[str, Figures]) -> list[Requirement]:
    """Judge every requirement by the figures of all tables that were measured."""
    own = [_against(figures, rival) for rival in LIMITS]
    single = [_one_table(figures, name) for name in SINGLE if name in figures]
    calibrated = [_calibrated(figures, whose) for whose in ("naive", NAIVE)]
    return [*own, *_mixed(figures), *_against_naive(figures), *single, *calibrated, _slopes(figures), _finite(figures)]


def _honest(one: Figures) -> float:
    return float(one["bnx"]["honest"]["log_loss"])


def _naive(one: Figures) -> float:
    return float(one["bnx"]["structures"]["naive"]["log_loss"])


def _against(figures: Mapping[str, Figures], rival: str) -> Requirement:
    own = list(ratios(figures, rival).values())
    mean = geometric_mean(own)
    measured = f"{mean:.3f}, median {median(own):.3f}"
    return Requirement(
        f"log loss to {rival}, geometric mean", f"at most {LIMITS[rival]:.2f}", measured, mean <= LIMITS[rival]
    )


def _mixed(figures: Mapping[str, Figures]) -> list[Requirement]:
    """Compare what is taken where a mix may be with the structure picked alone, both chosen without the row's fold."""
    own = {name: ratio(_honest(one), one["bnx"]["single"]["log_loss"]) for name, one in figures.items()}
    mean, most = geometric_mean(own.values()), max(own.values())
    failing = tuple(name for name, found in own.items() if found > _MIX_WORST)
    text = "log loss with the mix to that of the structure picked alone"
    return [
        Requirement(f"{text}, geometric mean", f"at most {_MIX_MEAN:.2f}", f"{mean:.3f}", mean <= _MIX_MEAN),
        Requirement(f"{text}, any table", f"at most {_MIX_WORST:.2f}", f"{most:.3f}", not failing, failing),
    ]


def _against_naive(figures: Mapping[str, Figures]) -> list[Requirement]:
    """Ask that choosing never costs much where naive Bayes is right."""
    apart = {name: one["bnx"]["against_naive"] for name, one in figures.items()}
    credibly = tuple(name for name, one in apart.items() if one["difference"] > 2 * one["error"] + 0.005)
    worse = tuple(name for name, one in apart.items() if one["difference"] > 0)
    far = tuple(name for name, one in figures.items() if _honest(one) > 1.05 * _naive(one) + 0.02)
    text = "tables worse than naive"
    return [
        Requirement(
            f"{text} by more than 2 paired standard errors + .005", "none", str(len(credibly)), not credibly, credibly
        ),
        Requirement(f"{text} in mean", f"at most {_WORSE}", str(len(worse)), len(worse) <= _WORSE, worse),
        Requirement(f"{text}: above 1.05 times its loss + .02", "none", str(len(far)), not far, far),
    ]


def _one_table(figures: Mapping[str, Figures], name: str) -> Requirement:
    loss, limit = _honest(figures[name]), SINGLE[name]
    return Requirement(f"log loss on {name}", f"at most {limit:.2f}", f"{loss:.3f}", loss <= limit)


def _calibrated(figures: Mapping[str, Figures], whose: str) -> Requirement:
    """Compare calibration errors with what naive Bayes shows, calibrated or not, and with what chance alone would."""
    failing = []
    for name, one in figures.items():
        honest = one["bnx"]["honest"]
        naive = one["bnx"]["structures"]["naive"] if whose == "naive" else one["rivals"]["models"][whose]
        allowed = max(naive["calibration_error"] / 2, 1.25 * honest["calibration_if_perfect"])
        failing += [name] if honest["calibration_error"] > allowed else []
    share = 1 - len(failing) / len(figures)
    text = f"calibration error at most half of {whose}'s, or 1.25 times what perfect calibration would show"
    return Requirement(text, f"on {_CALIBRATED:.0%} of tables", f"{share:.0%}", share >= _CALIBRATED, tuple(failing))


def _slopes(figures: Mapping[str, Figures]) -> Requirement:
    low, high = _SLOPES
    slopes = {
        name: one["bnx"]["honest"]["calibration_slope"]
        for name, one in figures.items()
        if one["bnx"]["honest"]["errors"] >= _ERRORS
    }
    failing = tuple(name for name, slope in slopes.items() if not low <= slope <= high)
    measured = f"{min(slopes.values(), default=1):.2f} to {max(slopes.values(), default=1):.2f}"
    text = f"calibration slope on tables with at least {_ERRORS} errors"
    return Requirement(text, f"{low} to {high}", measured, not failing, failing)


def every_score(one: Figures) -> Figures:
    """List the scores of all structures, and of their mix if there is one."""
    mix = one["bnx"]["mix"]
    return one["bnx"]["structures"] | ({"mix": mix} if mix else {})


def _finite(figures: Mapping[str, Figures]) -> Requirement:
    every = {name: [one["bnx"]["honest"], *every_score(one).values()] for name, one in figures.items()}
    least = min(score["least"] for scores in every.values() for score in scores)
    failing = tuple(
        name for name, scores in every.items() if not all(0 < score["least"] <= score["most"] < 1 for score in scores)
    )
    text = "probabilities of 0 or 1, in any structure, so an infinite loss"
    return Requirement(text, "none", f"least probability {least:.1g}", not failing, failing)
