"""k-dependence structures whose K is chosen out of fold, and those that leave attributes out."""

import json
from typing import Any

import numpy as np
import pandas as pd
import pytest
from builders import coded, compared, folds_of, predicted, recipe_of, started
from opentables import TABLES, load

from bnx.choosing import inner_losses
from bnx.comparison import Comparison
from bnx.dependence import Dependence
from bnx.documents import comparison_document, structure_document
from bnx.domains import codes_of
from bnx.errors import FormatError, StructureError
from bnx.formats.structure_json import classifier_document, classifier_of
from bnx.gating import Bounds
from bnx.learners import KdbChosen, KdbTrimmed, learner, singles
from bnx.learning import learn
from bnx.parameters import CANDIDATES
from bnx.scoring import terms_of
from bnx.structure import Structure, words
from bnx.trainings import make_trainings, mask_without

EXPLICIT = ("naive", *(f"kdb{k}" for k in range(1, 6)))


def planted(rows: int = 600, seed: int = 1, noise: int = 3) -> pd.DataFrame:
    """Draw three signs of the class, of which the third takes after the first two, and attributes of pure noise."""
    rng = np.random.default_rng(seed)
    target = rng.integers(0, 2, rows)
    a, b = (np.where(rng.random(rows) < p, target, rng.integers(0, 2, rows)) for p in (0.6, 0.5))
    c = np.where(rng.random(rows) < 0.9, a ^ b ^ target, rng.integers(0, 2, rows))
    frame = pd.DataFrame({"a": a, "b": b, "c": c})
    for k in range(noise):
        frame[f"noise{k}"] = rng.integers(0, 3, rows)
    return frame.astype(str).assign(kind=np.array(["no", "yes"])[target])


def depths(found: Comparison, name: str) -> list[int | None]:
    """List what was chosen on all rows and in every fold."""
    s, one = found.recipe.structures.index(name), found.evaluations[0]
    return [one.learned(held).structures[s].depth for held in ((), *((fold,) for fold in range(found.folds)))]


def test_k_and_smoothing_are_those_of_least_inner_loss_among_structures_learnt_by_name() -> None:
    """Each further parent must save 2 nats in all, and so must another smoothing than the first."""
    frame = planted(300)
    found = compared(frame, "kind", folds=5, structures=("naive", "kdb"))
    explicit = compared(frame, "kind", folds=5, structures=EXPLICIT)
    one, chosen = explicit.evaluations[0], found.evaluations[0]
    losses = inner_losses(one.engine, one.choices[()].trial, one.sample, CANDIDATES, True)
    for held in ((), *((fold,) for fold in range(5))):
        inner = [(tuple(sorted((*held, fold))), fold) for fold in range(5) if fold not in held]
        total = np.sum([losses[key] for key in inner], axis=0).min(axis=2)
        total += 2.0 * np.arange(6)[:, None] + 2.0 * (np.arange(len(CANDIDATES)) > 0)
        k, v = np.unravel_index(total.argmin(), total.shape)
        own = chosen.learned(held).structures[1]
        assert (own.depth, chosen.choices[held].smoothings[1]) == (k, CANDIDATES[v])
        assert own.parents == one.learned(held).structures[k].parents
    assert 2 in depths(found, "kdb")


def test_two_parents_are_taken_where_only_two_together_tell() -> None:
    """Given class and one other, c is a coin; given both, it is known: a parity needs K = 2."""
    frame = planted(1_500, seed=2, noise=0)
    found = compared(frame, "kind", structures=("naive", "kdb1", "kdb", "kdb-trimmed"))
    losses = dict(zip(found.recipe.structures, [one.pooled.log_loss for one in found.results], strict=True))
    assert depths(found, "kdb") == [2] * 11
    assert depths(found, "kdb-trimmed") == [2] * 11
    assert losses["kdb"] < losses["kdb1"] - 0.1
    assert losses["kdb-trimmed"] == pytest.approx(losses["kdb"], abs=1e-6)


def test_noise_is_left_out_and_has_no_parents() -> None:
    found = compared(planted(1_500, seed=2, noise=6), "kind", structures=("naive", "kdb", "kdb-trimmed"))
    own = found.evaluations[0].learned(()).structures[2]
    kept = {found.names[i] for i in range(9) if i not in own.dropped}
    assert {"a", "b", "c"} <= kept
    assert len(kept) <= 5
    assert [domain.name for domain in found.classifiers[2].domains] == [n for n in found.names if n in kept]
    noise = compared(planted(400, noise=5).drop(columns=["a", "b", "c"]), "kind", structures=("naive", "kdb"))
    assert depths(noise, "kdb") == [0] * 11


def test_what_is_left_out_takes_no_part_in_the_posterior() -> None:
    """The probabilities follow from the class prior and the tables in the file alone."""
    frame = planted(500, seed=3, noise=4)
    found = compared(frame, "kind", structures=("naive", "kdb-trimmed"), temperature=False)
    classifier, document = found.classifiers[1], classifier_document(found.classifiers[1])
    assert document["dropped"]
    assert not {one["name"] for one in document["attributes"]} & set(document["dropped"])
    codes = np.random.default_rng(1).integers(0, 2, (len(classifier.domains), 50))
    logs = np.tile(np.log(document["class"]["prior"]), (50, 1))
    place = {domain.name: k for k, domain in enumerate(classifier.domains)}
    for own, attribute in zip(codes, document["attributes"], strict=True):
        table = np.log(np.array(attribute["probabilities"]))
        parents = [codes[place[parent]] for parent in attribute["parents"]]
        logs += table[(slice(None), *parents, own)].T
    expected = np.exp(logs) / np.exp(logs).sum(axis=1, keepdims=True)
    assert classifier.probabilities(codes) == pytest.approx(expected, abs=1e-12)
    read = classifier_of(json.loads(json.dumps(document)), "x.json")
    assert read.dropped == classifier.dropped
    assert classifier_document(read) == document


def test_predictions_of_a_fold_do_not_depend_on_what_it_left_out() -> None:
    frame = planted(500, seed=3, noise=4)
    found = compared(frame, "kind", structures=("naive", "kdb-trimmed"))
    one = found.evaluations[0]
    p, fold = predicted(found, 1), folds_of(one)
    families = [one.choices[(f,)].trial.counts[(f,)].families for f in range(10)]
    assert all(own.silent is not None for own in families)
    for f in range(10):
        structure = one.learned((f,)).structures[1]
        kept = [i for i in range(len(found.names)) if i not in structure.dropped]
        rows = frame.iloc[np.flatnonzero(fold == f)].assign(p=p[fold == f, 0])
        alike = rows.groupby([found.names[i] for i in kept])["p"].agg(["min", "max"])
        assert (alike["max"] - alike["min"]).max() < 1e-12


def test_unobserved_cells_of_kept_attributes_are_summed_out_and_of_others_ignored() -> None:
    """What the folds' sums say is what the classifier of the same tables says, cell by cell."""
    rng = np.random.default_rng(4)
    frame = planted(600, seed=3, noise=4)
    for name in frame.columns[:-1]:
        frame.loc[rng.random(600) < 0.15, name] = ""
    found = compared(frame, "kind", structures=("naive", "kdb-trimmed"), missing="sum-out")
    classifier, one = found.classifiers[1], found.evaluations[0]
    assert classifier.dropped
    choice = one.choices[()]
    counted = choice.trial.counts[()]
    terms = terms_of(counted, counted.families.of[1], [choice.smoothings[1]])
    from_rows = terms.evidence(one.engine.codes, 0, 600)
    codes = one.engine.codes.astype(np.int64)
    codes[codes >= np.array([len(domain) for domain in found.domains])[:, None]] = -1
    whole, rough = classifier.evidence(codes_of(classifier.domains, codes, found.domains))
    assert not rough.any()
    assert from_rows[:, 0] == pytest.approx(whole[:, 1] - whole[:, 0], abs=1e-10)


def documents(jobs: int) -> str:
    found = compared(planted(300, noise=2), "kind", jobs, structures=("naive", "kdb", "kdb-trimmed"), resamples=5)
    return json.dumps([comparison_document(found), *(structure_document(found, s) for s in range(3))])


def test_threads_change_nothing() -> None:
    assert documents(1) == documents(2)


def test_the_choice_is_told_on_all_rows_and_in_every_fold() -> None:
    found = compared(planted(300, noise=2), "kind", folds=5, structures=("naive", "kdb", "kdb-trimmed"))
    naive, kdb, trimmed = comparison_document(found)["structures"]
    assert naive["chosen"] is None
    for s, entry in ((1, kdb), (2, trimmed)):
        own = found.evaluations[0]
        every = [entry["chosen"], *entry["chosen"]["by_fold"]]
        for held, told in zip([(), *((f,) for f in range(5))], every, strict=True):
            structure = own.learned(held).structures[s]
            assert told["most_parents"] == structure.depth
            assert told["dropped"] == [found.names[i] for i in structure.dropped]
            assert max(map(len, structure.parents)) <= (structure.depth or 0)
    assert kdb["words"].startswith(f"up to {kdb['chosen']['most_parents']} parent")
    assert "a number chosen out of fold" in kdb["words"]
    assert "chosen by leave-one-out" in trimmed["words"]
    assert structure_document(found, 2)["dropped"] == trimmed["chosen"]["dropped"]


def structures_without(codes: np.ndarray, target: np.ndarray, name: str, held: tuple[int, ...]) -> list[Structure]:
    """Learn in the training set without some of five folds of four blocks, which are dealt by the row's number."""
    table = coded(codes, target)
    engine = started(table, np.arange(len(target)) % 20, 20)
    masks = {held: mask_without(held, 5, 4)}
    trainings = make_trainings(engine, table.schema, masks, "mdl", 50)
    bounds = Bounds(table.schema.names)
    members, _ = singles([learner(name)], bounds)
    return list(learn(engine, trainings, members, bounds, recipe_of("class"))[0].structures)


@pytest.mark.parametrize("name", ["kdb", "kdb-trimmed"])
def test_held_out_rows_change_nothing(name: str) -> None:
    rng = np.random.default_rng(6)
    target = rng.integers(0, 3, 400)
    codes = np.array([np.where(rng.random(400) < 0.5, target, rng.integers(0, 3, 400)) for _ in range(5)])
    before = structures_without(codes, target, name, (1,))
    out = (np.arange(400) % 20 >= 4) & (np.arange(400) % 20 < 8)
    codes[:, out], target[out] = rng.integers(0, 3, (5, out.sum())), rng.integers(0, 3, out.sum())
    assert structures_without(codes, target, name, (1,)) == before
    assert structures_without(codes, target, name, ()) != structures_without(codes, target, name, (0,))


class Scripted:
    """Tells losses that were written down."""

    def __init__(self, table: np.ndarray) -> None:
        self.table = table

    def losses(self, order: Any, least: Any, models: int) -> np.ndarray:
        return self.table


def trimmed(table: np.ndarray, **bounds: Any) -> Structure:
    widest = Structure("kdb-trimmed", ((), (0,), (1, 0)), 5)
    limits = Bounds(("x", "y", "z"), **bounds)
    return KdbTrimmed().trim(Scripted(table), widest, [0, 1, 2], limits)


def test_of_equally_good_models_the_one_with_fewer_parents_then_attributes_is_kept() -> None:
    table = np.full((6, 4), 9.0)
    table[2, 3] = table[1, 3] = table[1, 2] = 5.0
    assert trimmed(table) == Structure("kdb-trimmed", ((), (0,), ()), 1, (2,))
    table[2, 3] -= 1.0
    assert trimmed(table) == Structure("kdb-trimmed", ((), (0,), (1, 0)), 2)


def test_the_first_attribute_and_required_edges_stay() -> None:
    table = np.arange(24.0).reshape(6, 4)  # no attribute at all is best, then no parents
    assert trimmed(table) == Structure("kdb-trimmed", ((), (), ()), 0, (1, 2))
    bound = trimmed(table, required=((0, 1),))
    assert bound == Structure("kdb-trimmed", ((), (0,), ()), 0, (2,))
    found = compared(
        planted(200, noise=2), "kind", structures=("naive", "kdb", "kdb-trimmed"), require=("noise0:noise1",)
    )
    for structure in found.structures[1:]:
        assert ("noise0", "noise1") in [(found.names[a], found.names[b]) for a, b in structure.edges]


def test_more_required_parents_than_five_are_refused() -> None:
    bounds = Bounds(tuple("abcdefg"), tuple((i, 6) for i in range(6)))
    with pytest.raises(StructureError, match="kdb gives an attribute at most 5 parents, but g has 6"):
        singles([KdbChosen()], bounds)
    with pytest.raises(StructureError, match="kdb-trimmed gives an attribute at most 5 parents, but g has 6"):
        KdbTrimmed().widest(Dependence(np.arange(7, 0, -1.0), np.ones((7, 7))), bounds)


def test_wide_levels_take_only_the_parents_that_there_is_room_for() -> None:
    """A family may have 4 cells a row: the last, of 2 levels, has room for two parents of 40, and no third."""
    rng = np.random.default_rng(8)
    target = rng.integers(0, 2, 900)
    wide = [(target * 20 + rng.integers(0, 20, 900)) for _ in range(4)]
    codes = np.array([*wide, *(rng.integers(0, 2, (3, 900)))])
    for structure in structures_without(codes, target, "kdb", ()):
        for child, parents in enumerate(structure.parents):
            assert np.prod([40 if member < 4 else 2 for member in (child, *parents)]) <= 4 * 900
    assert len(structures_without(codes, target, "kdb", ())[5].parents[6]) == 2
    assert len(structures_without(codes[4:], target, "kdb", ())[5].parents[2]) == 2


def test_what_is_left_out_has_no_edges() -> None:
    with pytest.raises(StructureError, match="leaves out has a parent or a child"):
        Structure("x", ((), (0,)), 1, (0,))
    with pytest.raises(StructureError, match="leaves out has a parent or a child"):
        Structure("x", ((), (0,)), 1, (1,))
    kept, own = Structure("x", ((), (), (0,)), 1, (1,)).kept()
    assert (kept, own) == ((0, 2), Structure("x", ((), (0,)), 1))


def test_words() -> None:
    assert words("kdb") == "up to 5 parents, their number chosen out of fold"
    assert words("kdb", 1) == "up to 1 parent, a number chosen out of fold"
    assert words("kdb-trimmed", 2, list("abcdefg")) == (
        "up to 2 parents, without a, b, c, d, e and 2 more, chosen by leave-one-out"
    )


@pytest.mark.parametrize("broken", [{"most_parents": 0}, {"most_parents": True}, {"dropped": ["a"]}, {"dropped": "z"}])
def test_files_that_contradict_themselves_are_refused(broken: dict[str, Any]) -> None:
    found = compared(planted(300), "kind", structures=("naive", "kdb2"))
    document = classifier_document(found.classifiers[1]) | broken
    with pytest.raises(FormatError, match="contradicts itself"):
        classifier_of(document, "x.json")


def test_corral_needs_two_parents_and_not_the_irrelevant_attribute() -> None:
    """Corral (John, Kohavi & Pfleger 1994): naive Bayes errs on 20 of 128; one attribute is irrelevant by making."""
    found = compared(load("corral"), "class", structures=(*EXPLICIT, "kdb", "kdb-trimmed"))
    losses = dict(zip(found.recipe.structures, [one.pooled.log_loss for one in found.results], strict=True))
    assert losses["kdb"] <= max(losses[name] for name in EXPLICIT)
    assert losses["kdb"] < 0.1 * losses["naive"]
    assert losses["kdb-trimmed"] < 0.1 * losses["naive"]
    assert "Irrelevant" in found.classifiers[-1].dropped


@pytest.mark.tables
@pytest.mark.parametrize("name", ["house_votes_84", "tic_tac_toe", "monk2", "breast_cancer_lj", "car3", "zoo"])
def test_kdb_is_no_worse_than_the_worst_that_it_chooses_from(name: str) -> None:
    found = compared(load(name), TABLES[name].target, structures=(*EXPLICIT, "kdb", "kdb-trimmed"))
    losses = dict(zip(found.recipe.structures, [one.pooled.log_loss for one in found.results], strict=True))
    assert losses["kdb"] <= max(losses[member] for member in EXPLICIT)
