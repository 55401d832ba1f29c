"""What each row says, arranged for computing: rows with the same quantities form a block.

Here, and only here, the words of a row become quantities: the design, the contrast, the direction, the number of
coded groups, the tails of a p value. Values outside their support and statistics of a test the design does not have
are left out; the audit says so.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from extractor.coding import NO_CONTRAST, Coding, leaf_of_d
from extractor.distinct import distinct, together
from extractor.quantities import DEFAULTS, VOCABULARY, Quantity, Role, Shape
from extractor.routes.engine import Estimate
from extractor.routes.planner import Start
from extractor.study.cells import leaves_from_cells
from extractor.study.terms import factors_of, sums_over_terms, terms_per_row
from extractor.table import Assumption, BoolArray, FloatArray, Numbers, ObjectArray, ReportedTable, Variable

_CLASSICAL_STATISTICS = ("f_value", "t_value", "p_value", "df_error", "df", "df_effect")
_OTHER_TESTS = ("h_value", "u_value", "z_value", "chi_squared", "rank_sum", "signed_rank_sum")
"""Statistics beside which a p value may be theirs, not that of F or t."""

_CORRECTABLE = ("within", "mixed")
"""Designs in which a sphericity correction makes both df fractional and leaves F as it is."""

_PAIRS_OF_SCORES = {"sd_change": "sd_difference", "mean_change": "mean_difference"}
"""What the first change column of a paired row stands for."""

_ABSENT, _POINT, _BOUND = 0, 1, 2


@dataclass(slots=True)
class Block:
    """Rows with one signature.

    positions : rows of the table, shape (rows,).
    design : the design whose relations hold; a one-way row with one effect df is a two-group row.
    leaves : the evidence as estimates; scalars (rows,), group quantities (rows, groups).
    origins : the printed cells behind each leaf, in group order; coded facts have none.
    partial : group quantities of which only some groups are known, unknown ones NaN; the audit narrows them.
    """

    positions: NDArray[np.intp]
    design: str
    groups: int
    leaves: dict[str, Estimate]
    bounds: frozenset[str]
    assumed: Mapping[str, Assumption]
    origins: dict[str, tuple[Variable, ...]]
    partial: dict[str, Estimate] = field(default_factory=dict)

    @property
    def start(self) -> Start:
        """What a search for routes may start from."""
        assumed = frozenset(self.assumed)
        return Start(frozenset(self.leaves) - self.bounds - assumed, self.bounds, assumed)


@dataclass(slots=True)
class Evidence:
    """The table as blocks, and per row why it cannot be used at all ("" where it can).

    remarks : per row, how the row was read where that changes a result.
    contrasts : per row with several groups, how the contrast was read; it concerns signed metrics only.
    """

    table: ReportedTable
    blocks: list[Block]
    blocked: ObjectArray
    remarks: ObjectArray
    contrasts: ObjectArray


def usable(quantity: Quantity, numbers: Numbers) -> BoolArray:
    """Which printed values their quantity allows: inside the support, and whole where only whole numbers exist."""
    inside = (numbers.low <= quantity.high) & (numbers.high >= quantity.low)
    if quantity.integer:
        inside &= np.ceil(numbers.low) <= np.floor(numbers.high)
    return numbers.given & inside


def fractional_df(table: ReportedTable) -> BoolArray:
    """Rows whose error df are not whole: a Welch or corrected test, not the classical one."""
    found = np.zeros(table.rows, dtype=bool)
    for name in ("df_error", "df"):
        numbers = table.numbers.get((name, None))
        if numbers is not None:
            found |= numbers.given & (np.ceil(numbers.low) > np.floor(numbers.high))
    return found


def gather(table: ReportedTable) -> Evidence:
    """Arrange a table for computing."""
    return _Gathering(table).evidence()


class _Gathering:
    """The working state of ``gather``: one array per step, each over all rows."""

    def __init__(self, table: ReportedTable) -> None:
        self.table = table
        self.rows = table.rows
        self.coding = Coding(table)
        self.constants: dict[float, FloatArray] = {}
        self.joint = self._joint_term()
        self.numbers = {v: n for v, n in table.numbers.items() if VOCABULARY[v[0]].role is Role.REPORTED}
        self.use = {v: usable(VOCABULARY[v[0]], n) for v, n in self.numbers.items()}
        self.groups = self._coded_groups()
        self.design = self.coding.effective_designs(
            self.groups, self._room_for_more(), self.value("df_effect"), self.value("k_groups")
        )
        self._set_aside()
        self.weights = self.coding.weights(self.design, self.groups)
        self.contrasts = distinct(table.fact("contrast"))
        self.direction = self.coding.directions()
        self.compared = self._compared()
        self.standardizer = self.coding.standardizers(self.design)
        # with several groups, a p value beside a t and no F is the contrast's
        one_factor = np.isin(self.design, ("one-way", "one-way-partial"))
        self.contrast_p = one_factor & self.given("t_value") & ~self.given("f_value")
        # an F test has one tail of F, which is both tails of t
        by_t = np.isin(self.design, ("two-group", "paired"))
        self.f_test = self.given("f_value") | self.given("df_effect") | ~by_t
        self.sums = sums_over_terms(table, self.use, self.design) | leaves_from_cells(table, self.design)

    def given(self, name: str, group: int | None = None) -> BoolArray:
        found = self.use.get((name, group))
        return found if found is not None else np.zeros(self.rows, dtype=bool)

    def value(self, name: str, group: int | None = None) -> FloatArray:
        numbers = self.numbers.get((name, group))
        if numbers is None:
            return np.full(self.rows, np.nan)
        return np.where(self.given(name, group), numbers.value, np.nan)

    def evidence(self) -> Evidence:
        codes, columns = self._signatures()
        coding = self.coding
        live = np.flatnonzero(coding.blocked == "")
        blocks = []
        if len(live):
            signatures = np.ascontiguousarray(codes[live])
            texts = signatures.view(np.dtype((np.bytes_, signatures.shape[1] * signatures.itemsize))).ravel()
            alike = together(live, distinct(texts)[1])
            blocks = [self._block(rows, codes, columns) for rows in alike]
        return Evidence(self.table, blocks, coding.blocked, coding.remarks, coding.contrasts)

    def _coded_groups(self) -> FloatArray:
        """Highest group number with any number in it; 0 where no group is coded."""
        highest = np.zeros(self.rows)
        for name, group in self.use:
            if group is not None:
                highest = np.where(self.given(name, group), np.maximum(highest, group), highest)
        # a design of two groups has two, whichever of them is coded
        two = np.isin(self.table.fact("design"), ("two-group", "paired", "pre-post-control"))
        highest = np.where(two & (highest == 1), 2.0, highest)
        # conditions of a model with several within factors are cells, not levels of the row's own factor
        several = (self.table.fact("design") == "within") & (
            (terms_per_row(self.table, self.table.fact("design")) > 1) | self.joint
        )
        self.coding.remark(
            several & (highest > 0), "conditions of a model with several terms are not used here"
        )
        return np.where(several, 0.0, highest)

    def _joint_term(self) -> BoolArray:
        terms = self.table.fact("term").astype(str)
        joint = {t: len(factors_of(t)) > 1 for t in set(terms)}
        return np.isin(terms, [t for t, several in joint.items() if several])

    def _compared(self) -> BoolArray:
        """Whether a row compares groups, so that its F or t has a contrast.

        The interaction of a factorial design has none unless its cells are coded, and of a mixed design only the
        interaction is a difference of changes.
        """
        joint, termed = self.joint, self.table.fact("term") != ""
        celled = np.isin(self.table.fact("analysis"), list(self.table.cells))
        interaction = (self.design == "factorial") & joint & ~celled
        main = (self.design == "mixed") & ~joint & termed
        self.coding.remark(interaction, "an interaction is no contrast of two groups")
        self.coding.remark(main, "a main effect of a mixed design is no difference of changes")
        return np.asarray((self.table.fact("contrast") != NO_CONTRAST) & ~interaction & ~main)

    def _room_for_more(self) -> BoolArray:
        """Whether the dfs leave at least two participants for each group that is not coded."""
        total = np.zeros(self.rows)
        for name, group in self.use:
            if name == "n" and group is not None:
                total += np.where(self.given(name, group), self.value(name, group), 0.0)
        df_effect = self.value("df_effect")
        whole = np.fmax(self.value("n_total"), df_effect + self.value("df_error") + 1)
        missing = np.fmax(df_effect + 1, self.value("k_groups")) - self.groups
        return np.isnan(whole) | (whole >= total + 2 * missing)

    def _set_aside(self) -> None:
        """Leave out the statistics of a test that is not the design's, and a d over an unsuitable SD."""
        fractional = fractional_df(self.table)
        correctable = np.isin(self.design, _CORRECTABLE)
        for name in _CLASSICAL_STATISTICS:
            keep = ~fractional | (correctable & ~np.isin(name, ("df_effect", "df_error")))
            if (name, None) in self.use:
                self.use[name, None] = self.use[name, None] & keep
        other = np.logical_or.reduce([self.given(name) for name in _OTHER_TESTS])
        for name, own in (("p_value", np.zeros(self.rows, dtype=bool)), ("df", self.given("t_value"))):
            if (name, None) in self.use:
                self.coding.remark(
                    other & ~own & self.use[name, None], f"{name} beside another test is not used"
                )
                self.use[name, None] = self.use[name, None] & (own | ~other)
        self.corrected = fractional & correctable
        self.coding.remark(
            fractional & ~correctable, "the df are not whole: its test is not the classical one"
        )
        self.coding.remark(self.corrected, "the df carry a sphericity correction")

    def _signatures(self) -> tuple[NDArray[np.int16], list[Variable]]:
        """One row of small integers per row; equal rows share a plan."""
        columns = sorted(self.use, key=lambda v: (v[0], v[1] or 0))
        words = (distinct(w)[1] for w in (self.design, self.standardizer))
        facts = (
            self.joint,
            self.groups,
            ~np.isnan(self.direction),
            self.compared,
            self.contrast_p,
            self.f_test,
            self.corrected,
        )
        parts = [*words, *facts, *(np.isfinite(e.low) for e in self.sums.values())]
        for variable in columns:
            known = np.where(np.isnan(self.numbers[variable].value), _BOUND, _POINT)
            parts.append(np.where(self.use[variable], known, _ABSENT))
        return np.column_stack([part.astype(np.int16) for part in parts]), columns

    def _block(self, rows: NDArray[np.intp], codes: NDArray[np.int16], columns: list[Variable]) -> Block:
        first = int(rows[0])
        found = codes[first, codes.shape[1] - len(columns) :]
        state = {v: int(c) for v, c in zip(columns, found, strict=True)}
        block = Block(rows, str(self.design[first]), int(self.groups[first]), {}, frozenset(), {}, {})
        bounds: set[str] = set()
        for name in dict.fromkeys(v[0] for v in columns if state[v] != _ABSENT):
            quantity = VOCABULARY[name]
            if quantity.shape is Shape.GROUP:
                self._group_leaf(block, quantity, state, bounds)
            else:
                self._leaf(block, name, (name, None), state[name, None], bounds)
        self._place_words(block, bounds)
        self._add_corrected_dfs(block)
        block.bounds = frozenset(bounds)
        self._add_facts(block)
        self._add_assumptions(block)
        return block

    def _leaf(self, block: Block, name: str, variable: Variable, state: int, bounds: set[str]) -> None:
        block.leaves[name] = self._estimate(variable, block.positions)
        block.origins[name] = (variable,)
        if state == _BOUND:
            bounds.add(name)

    def _estimate(self, variable: Variable, rows: NDArray[np.intp]) -> Estimate:
        numbers, quantity = self.numbers[variable], VOCABULARY[variable[0]]
        low = np.maximum(numbers.low[rows], quantity.low)
        high = np.minimum(numbers.high[rows], quantity.high)
        return Estimate(numbers.value[rows], low, high)

    def _group_leaf(
        self, block: Block, quantity: Quantity, state: dict[Variable, int], bounds: set[str]
    ) -> None:
        """Stack a group quantity; complete ones are leaves, incomplete ones serve the audit only."""
        if not block.groups:
            return
        members: list[Variable] = [(quantity.name, g) for g in range(1, block.groups + 1)]
        states = [state.get(m, _ABSENT) for m in members]
        if block.design == "paired" and quantity.name in _PAIRS_OF_SCORES:
            if states[0] != _ABSENT:
                self._leaf(block, _PAIRS_OF_SCORES[quantity.name], members[0], states[0], bounds)
            return
        size = len(block.positions)
        unknown = Estimate(np.full(size, np.nan), np.full(size, quantity.low), np.full(size, quantity.high))
        parts = [
            self._estimate(m, block.positions) if s != _ABSENT else unknown
            for m, s in zip(members, states, strict=True)
        ]
        stacked = Estimate(
            *(np.column_stack([getattr(p, end) for p in parts]) for end in ("value", "low", "high"))
        )
        block.origins[quantity.name] = tuple(members)
        if _ABSENT in states:
            block.partial[quantity.name] = stacked
            return
        block.leaves[quantity.name] = stacked
        if _BOUND in states:
            bounds.add(quantity.name)

    def _place_words(self, block: Block, bounds: set[str]) -> None:
        """Give a printed d, g or p the quantity it stands for in this design."""
        first = block.positions[0]
        standardizer = str(self.standardizer[first])
        if "cohens_d" in block.leaves:
            self._rename(block, "cohens_d", leaf_of_d(standardizer, block.design), bounds)
        if "hedges_g" in block.leaves and leaf_of_d(standardizer, block.design) not in (
            "cohens_d",
            "d_restored",
        ):
            self._drop(block, "hedges_g", bounds, "a printed g of this standardizer is not used")
        if "p_value" in block.leaves and self.corrected[first]:
            self._rename(block, "p_value", "p_corrected", bounds)
        elif "p_value" in block.leaves and bool(self.contrast_p[first]):
            self._rename(block, "p_value", "p_contrast", bounds)
        elif "p_value" in block.leaves and "t_value" in block.leaves and block.design.startswith("one-way"):
            self._drop(
                block, "p_value", bounds, "p stands beside an F and a t: left out, it could be either's"
            )

    def _rename(self, block: Block, old: str, new: str, bounds: set[str]) -> None:
        if old == new:
            return
        block.leaves[new], block.origins[new] = block.leaves.pop(old), block.origins.pop(old)
        if old in bounds:
            bounds.remove(old)
            bounds.add(new)

    def _drop(self, block: Block, name: str, bounds: set[str], why: str) -> None:
        del block.leaves[name], block.origins[name]
        bounds.discard(name)
        self.coding.remark(block.positions, why)

    def _add_corrected_dfs(self, block: Block) -> None:
        if not self.corrected[block.positions[0]]:
            return
        for name in ("df_effect", "df_error"):
            numbers = self.numbers.get((name, None))
            if numbers is None:
                continue
            rows = block.positions
            # a count is read as exact, but a corrected df is a rounded number
            half = 0.5 * 10.0 ** -np.maximum(numbers.decimals[rows], 0)
            value = numbers.value[rows]
            block.leaves[f"corrected_{name}"] = Estimate(value, value - half, value + half)
            block.origins[f"corrected_{name}"] = ((name, None),)

    def _add_facts(self, block: Block) -> None:
        rows, first = block.positions, block.positions[0]
        # the two groups of a table of counts have no columns of their own
        several = block.groups >= 2 or (block.design == "two-group" and not block.groups)
        if several and self.compared[first]:
            texts, codes = self.contrasts
            held, which = np.unique(codes[rows], return_inverse=True)
            stacked = np.stack([self.weights[str(texts[at]), block.groups] for at in held])[which]
            if stacked.any(axis=-1).all():
                block.leaves["contrast_weight"] = Estimate(stacked, stacked, stacked)
        if not np.isnan(self.direction[first]):
            block.leaves["direction"] = _certain(self.direction[rows])
        count = coded_k(block)
        if count:
            block.leaves.setdefault("k_groups", self._constant(count, block))
        if not self.joint[first]:
            block.leaves["one_factor"] = self._constant(1.0, block)
        if block.design == "pre-post-control":
            block.leaves.setdefault("df_effect", self._constant(1.0, block))
        if "p_value" in block.leaves and self.f_test[first] and "tails" not in block.leaves:
            block.leaves["tails"] = self._constant(2.0, block)
        for name, estimate in self.sums.items():
            if np.isfinite(estimate.low[first]):
                block.leaves[name] = Estimate(estimate.value[rows], estimate.low[rows], estimate.high[rows])

    def _add_assumptions(self, block: Block) -> None:
        supplied = {name: Assumption(d.value, d.by) for name, d in DEFAULTS.items()}
        supplied |= dict(self.table.assumptions)
        taken = {name: a for name, a in supplied.items() if name not in block.leaves and name in VOCABULARY}
        for name, assumption in taken.items():
            block.leaves[name] = self._constant(assumption.value, block)
        block.assumed = taken

    def _constant(self, value: float, block: Block) -> Estimate:
        """One value known of all rows of a block; blocks share it, so nobody may write into it."""
        if value not in self.constants:
            self.constants[value] = np.full(self.rows, value)
            self.constants[value].flags.writeable = False
        return _certain(self.constants[value][: len(block.positions)])


def coded_k(block: Block) -> float:
    """The number of groups or conditions that the coding itself says, 0 where it says none."""
    if block.design in ("two-group", "paired", "pre-post-control"):
        return 2.0
    return float(block.groups) if block.design in ("one-way", "within", "ancova") else 0.0


def _certain(values: FloatArray) -> Estimate:
    return Estimate(values, values, values)
