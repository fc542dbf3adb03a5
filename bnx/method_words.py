"""What stands in the section on how it was done: sources of the methods, how to read verdicts, words explained."""

__all__ = ["GLOSSARY", "SOURCES", "VERDICTS_READ"]

SOURCES = (
    (
        "Structures",
        "tree of attributes, Friedman, Geiger & Goldszmidt 1997, Chow & Liu 1968; directions under required edges, "
        "Edmonds 1967; up to k parents, Sahami 1996; parents by held-out log loss, Keogh & Pazzani 1999, Grossman & "
        "Domingos 2004",
    ),
    (
        "Tests given the class",
        "G as twice the information, Kullback 1959; when a chi-square tail can be trusted, Cochran 1954; moments of X² "
        "given the margins, Haldane 1940, Dawson 1954, and the tail fitted to them, Mielke & Berry 1985; random "
        "tables, Besag & Clifford 1991; pairs that no table could reject, Tarone 1990",
    ),
    (
        "Bits and their intervals",
        "correction for chance, Miller 1955, Vinh, Epps & Bailey 2010; what the class explains, McGill 1954; V, Cramér "
        "1946; interval, Agresti 2002, Williams 1976",
    ),
    (
        "Many tests at once",
        "Holm 1979; Benjamini & Hochberg 1995; Benjamini & Yekutieli 2001; edges of a tested tree, Katsevich, Sabatti "
        "& Bogomolov 2021",
    ),
    (
        "A pair by class",
        "adjusted residuals, Haberman 1973; odds ratio over the classes, Mantel & Haenszel 1959, with the interval of "
        "Robins, Breslow & Greenland 1986; whether it is the same in all, Breslow & Day 1980, Tarone 1985",
    ),
    ("Weight of evidence, and evidence counted twice", "Good 1950; the average over records and classes is our own"),
    ("Records on which two structures disagree", "Jensen-Shannon divergence, Lin 1991"),
    (
        "Tables and calibration",
        "back-off smoothing, Friedman, Geiger & Goldszmidt 1997, Petitjean, Buntine, Webb & Zaidi 2018; temperature, "
        "Guo, Pleiss, Sun & Weinberger 2017; cells not observed, Zhang & Poole 1996, Dechter & Rish 2003",
    ),
    ("Cut points of numeric attributes", "Fayyad & Irani 1993"),
    (
        "Differences between structures",
        "corrected resampled t, Nadeau & Bengio 2003; chances and region of practical equivalence, Corani & Benavoli "
        "2015; p over the structures, Holm 1979",
    ),
    ("Stability over random halves", "Meinshausen & Bühlmann 2010"),
    (
        "Mix of structures",
        "Genest & Zidek 1986; Heskes 1998; Vovk 1990; sharpened by Kull, Silva Filho & Flach 2017",
    ),
    ("Weighted rows", "effective rows, Kish 1965"),
)
"""What for, and who: authors and year."""

VERDICTS_READ = (
    ("dependent", "independence given the class is rejected, after adjustment for the number of pairs"),
    ("negligible", "whatever may be there is less than the bits that matter: naive Bayes is safe here"),
    ("detected, but negligible", "rejected, but less than the bits that matter"),
    ("not enough data", "not rejected, but this sample could have missed a dependence that matters: not independence"),
    ("gains", "an edge that saves bits on held-out records: its 95 % interval lies above 0, most folds chose it"),
    ("undecided", "an edge whose interval holds 0, or that fewer than half of the folds chose"),
    ("loses", "an edge that costs bits on held-out records"),
    ("can be chance", "a difference whose 95 % interval holds 0"),
    ("too little to matter", "a difference whose 95 % interval lies within the region of practical equivalence"),
)
"""A verdict of the page and how to read it."""

GLOSSARY = (
    ("naive, tan, kdb2", "no edges; a tree of edges; up to so many parents besides the class; -tested: with a gate"),
    ("out of fold", "by what was learnt from all other folds only"),
    ("bits", "the unit of information: one bit halves or doubles the odds"),
    ("log loss", "mean of −log2 of the probability given to what came true: 0 is perfect, 1 bit is a coin toss"),
    (
        "weight of evidence",
        "how many bits a level adds to the odds of one class against another; naive Bayes adds up those of all "
        "attributes",
    ),
    ("counted twice", "the part of that sum that a dependent attribute repeats, as if it were news"),
    ("bits given the class", "how much one attribute tells of another among records of the same class"),
    (
        "temperature",
        "what the evidence is multiplied by so that probabilities hold; well below 1, the structure is too sure of "
        "itself",
    ),
    ("held-out gain", "bits per record lost, on records that were not learnt from, when one edge is taken away"),
    ("stability", "share of random halves of the records in which learning joins the two attributes again"),
    ("gate", "the test that an edge of a tested structure had to pass, given the class and the parents before it"),
    ("honest score", "score on folds that took no part in choosing what scores them"),
    (
        "region of practical equivalence",
        "differences too small to matter: 0.01 bits of log loss, or 5 % of the best log loss if that is less",
    ),
    ("balanced accuracy", "mean over the classes of the share of their records that are right"),
    (
        "smoothing",
        "what is added to counts so that no probability is 0: laplace:1 a record to each level, backoff:16 sixteen "
        "records spread as in the table with a parent less",
    ),
    ("free parameters", "probabilities in the tables that are free to choose"),
    ("Brier", "squared error of the probabilities, summed over the classes: 0 is perfect"),
    ("AUC", "chance that a record of a class gets a higher probability of it than a record of the rest"),
    ("calibration error", "mean distance between how sure the answers are and how often they are right"),
)
"""A word of the page and what it means."""
