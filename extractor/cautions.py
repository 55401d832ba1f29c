"""The cautions that stand wherever findings or effects are shown."""

FINDINGS = (
    "A finding is a question about printed numbers, not an accusation: read the page again first.",
    "It says that numbers disagree under the design that was coded, not which of them is wrong, nor why.",
    "Rule out innocent reasons: one-tailed tests, adjusted p values, covariates, missing cases, corrected or Welch "
    "tests, weighted means, other types of sums of squares, subsamples.",
    "No finding does not mean correct: errors that keep the arithmetic intact cannot be seen.",
    "Many checks on many rows raise some flags by chance; before saying anything in public, ask the authors.",
)

EFFECTS = (
    "Approximations and assumptions stand beside each effect; change them and the effect changes.",
    "A bound is not an estimate and is not to be pooled as one.",
    "Squared indices have no direction and are biased upward in small samples; negative ω² and ε² are kept on purpose.",
    "Several rows of one sample are not independent evidence.",
    "Follow the review's protocol, its reporting standards and a qualified statistician.",
)
