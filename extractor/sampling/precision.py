"""Sampling variance and confidence interval of each metric: which function serves which metric, design and method.

An entry is declared like a relation: a function whose parameter names are the quantities it needs, the metric's own
estimate among them, so that the planner finds the rest. The functions stand in ``variance_explained_precision``,
``difference_precision`` and ``association_precision``.
"""

from __future__ import annotations

import inspect
from collections.abc import Callable, Collection, Iterable
from dataclasses import dataclass
from importlib import import_module

from extractor.catalogue.relation import FloatArray, Interval
from extractor.catalogue.standardizers import DEFAULT
from extractor.quantities import METRICS

Variance = Callable[..., FloatArray]
Limits = Callable[..., Interval]

LARGE, EXACT = "large-sample", "exact"
METHODS = (EXACT, LARGE)
_LARGE_FIRST = ("cohens_d", "hedges_g", "r", "fisher_z", "log_odds_ratio")
PREFERRED = dict.fromkeys(METRICS, EXACT) | dict.fromkeys(_LARGE_FIRST, LARGE)
"""Method used when the user does not choose; the reasons stand in the README."""


@dataclass(frozen=True, slots=True)
class Precision:
    """How a variance or confidence limits are computed, and for which metric, designs and standardizers.

    name : what ``variance_method`` prints, or the source of the limits. function : takes ``needs`` in order; limits
    also take ``level``. where : a quantity without which the entry is not meant, and with which it goes first.
    """

    metric: str
    method: str
    name: str
    designs: frozenset[str]
    standardizers: frozenset[str]
    needs: tuple[str, ...]
    function: Callable[..., object]
    where: str = ""

    def serves(self, metric: str, design: str, standardizer: str) -> bool:
        """Whether the entry is for this case."""
        return self.metric == metric and design in self.designs and standardizer in self.standardizers


VARIANCES: list[Precision] = []
LIMITS: list[Precision] = []


def enter_variance(
    metric: str,
    method: str,
    name: str,
    designs: Iterable[str],
    function: Variance,
    standardizers: Iterable[str] = ("pooled",),
    where: str = "",
) -> None:
    """Enter a variance; the first parameter called ``estimate`` stands for the metric's own estimate."""
    VARIANCES.append(_entry(metric, method, name, designs, standardizers, function, where))


def enter_limits(
    metric: str,
    name: str,
    designs: Iterable[str],
    function: Limits,
    standardizers: Iterable[str] = ("pooled",),
    where: str = "",
) -> None:
    """Enter confidence limits; as ``enter_variance``, with a last parameter ``level``."""
    LIMITS.append(_entry(metric, "", name, designs, standardizers, function, where))


def _entry(
    metric: str,
    method: str,
    name: str,
    designs: Iterable[str],
    standardizers: Iterable[str],
    function: Callable[..., object],
    where: str,
) -> Precision:
    parameters = [p for p in inspect.signature(function).parameters if p != "level"]
    needs = tuple(metric if p == "estimate" else p for p in parameters)
    return Precision(
        metric, method, name, frozenset(designs), frozenset(standardizers), needs, function, where
    )


def load() -> None:
    """Import the modules that enter their functions here."""
    for module in (
        "variance_explained_precision",
        "difference_precision",
        "association_precision",
        "shared_control",
    ):
        import_module(f"extractor.sampling.{module}")


def standardizer_of(route_standardizer: str, design: str) -> str:
    """The standardizer of an effect: what the route says, else the design's usual one."""
    return route_standardizer or DEFAULT.get(design, "pooled")


def variances_of(
    metric: str, method: str | None, design: str, standardizer: str, known: Collection[str] = ()
) -> list[Precision]:
    """The variances of a case, the wanted method first; several where they rest on different evidence.

    known : quantities of the row, for entries that are meant for some only.
    """
    load()
    wanted = method or PREFERRED[metric]
    fitting = _meant(VARIANCES, metric, design, standardizer, known)
    return sorted(fitting, key=lambda p: (p.method != wanted, not p.where))


def limits_of(metric: str, design: str, standardizer: str, known: Collection[str] = ()) -> list[Precision]:
    """The confidence limits of a case; several where they rest on different evidence. known : as for variances."""
    load()
    return sorted(_meant(LIMITS, metric, design, standardizer, known), key=lambda p: not p.where)


def _meant(
    entries: list[Precision], metric: str, design: str, standardizer: str, known: Collection[str]
) -> list[Precision]:
    fitting = (p for p in entries if p.serves(metric, design, standardizer))
    return [p for p in fitting if not p.where or p.where in known]


def methods_of(metric: str) -> list[str]:
    """The methods by which a metric's variance can be had in some design."""
    load()
    return sorted({p.method for p in VARIANCES if p.metric == metric})
