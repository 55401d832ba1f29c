"""A codebook (TOML): how a team's own headings, habits and scales map onto the vocabulary.

Everything is checked when it is loaded. Unknown words are errors that name file, line and the nearest known
word: a misspelt key that is ignored would change results unseen.
"""

from __future__ import annotations

import re
import tomllib
from collections.abc import Mapping
from dataclasses import dataclass, field
from importlib import resources
from importlib.resources.abc import Traversable
from pathlib import Path

from extractor.codebook_rules import Checker, nearest
from extractor.errors import InvalidCodebook
from extractor.printed.reading import ROUNDINGS, quoted, spelled_missing
from extractor.printed.reported import MOST_COUNTED
from extractor.quantities import DESIGNS, FACTS, VOCABULARY, Role, Shape
from extractor.table import Assumption, Variable

Meaning = Variable | str
"""What a heading stands for: a variable, or the name of a coded fact."""

EFFECT_COLUMNS = (
    "row",
    "study",
    "outcome",
    "effect",
    "metric",
    "estimate",
    "variance",
    "standard_error",
    "ci_low",
    "ci_high",
    "n_total",
    "grade",
    "route",
    "assumptions",
    "standardizer",
    "estimate_low",
    "estimate_high",
    "variance_method",
    "status",
    "reason",
    "findings",
)
"""Columns of the effect table, which ``[rename]`` may rename."""

RESPONSES = ("integer", "binary", "continuous")
MOST_GROUPS = 200
"""More groups belong into a long sheet."""

_KEYS = (
    "title",
    "design",
    "decimal_mark",
    "rounding",
    "missing",
    "alpha",
    "columns",
    "decimals",
    "assume",
    "scale",
    "rename",
)
_MOST_DECIMALS = 12
_LARGEST = 1 << 20
_GROUP = re.compile(r"(?P<name>[a-z0-9_]+?)_(?P<group>[1-9][0-9]{0,3})")


def normalised(heading: str) -> str:
    """A heading as canonical names are compared: lower case, one underscore for spaces and hyphens."""
    return re.sub(r"[\s\-‐‑–_]+", "_", heading.strip()).casefold()


def _spaced(heading: str) -> str:
    """A heading with single spaces; case kept, since F and f may be two columns."""
    return " ".join(heading.split())


def canonical(heading: str) -> Meaning | None:
    """What a heading that is a name of the vocabulary stands for."""
    name = normalised(heading)
    if name in FACTS:
        return name
    quantity = VOCABULARY.get(name)
    if quantity is not None and quantity.role is Role.REPORTED and quantity.shape is Shape.SCALAR:
        return (name, None)
    found = _GROUP.fullmatch(name)
    if found is None:
        return None
    quantity = VOCABULARY.get(found["name"])
    if quantity is None or quantity.role is not Role.REPORTED or quantity.shape is not Shape.GROUP:
        return None
    return (quantity.name, int(found["group"]))


def canonical_names() -> list[str]:
    """Every word ``[columns]`` takes; group quantities without their number."""
    return [*FACTS, *(name for name, q in VOCABULARY.items() if q.role is Role.REPORTED)]


@dataclass(frozen=True, slots=True)
class Codebook:
    """How a sheet is to be read. Build it with ``load_codebook`` or ``default_codebook``.

    title, path : for messages and the settings record; both "" for the default codebook.
    design : of rows that do not say; "" where rows must.
    decimal_mark, rounding : how numbers are printed; see ``reported.read_number``.
    missing : codes of blank cells, as ``reading.spelled_missing`` makes them.
    alpha : the level meant by "ns".
    columns : meaning by heading, spaces tidied, case kept.
    patterns : (expression with a group ``group``, quantity) for headings of numbered groups.
    decimals : printed decimals by quantity, for numeric cells.
    assumptions : values nobody reported.
    scale : value by quantity (scale_min, scale_max, scale_items), for rows that do not say.
    responses : integer, binary, continuous or "".
    rename : new names of effect table columns.
    """

    title: str = ""
    design: str = ""
    decimal_mark: str = "."
    rounding: str = "nearest"
    missing: frozenset[str] = frozenset()
    alpha: float = 0.05
    columns: Mapping[str, Meaning] = field(default_factory=dict)
    patterns: tuple[tuple[re.Pattern[str], str], ...] = ()
    decimals: Mapping[str, int] = field(default_factory=dict)
    assumptions: Mapping[str, Assumption] = field(default_factory=dict)
    scale: Mapping[str, float] = field(default_factory=dict)
    responses: str = ""
    rename: Mapping[str, str] = field(default_factory=dict)
    path: str = ""
    folded: Mapping[str, frozenset[Meaning]] = field(init=False, repr=False, compare=False)
    """What ``columns`` may mean without regard to case, by ``normalised`` heading."""

    def __post_init__(self) -> None:
        folded: dict[str, frozenset[Meaning]] = {}
        for heading, meaning in self.columns.items():
            name = normalised(heading)
            folded[name] = folded.get(name, frozenset()) | {meaning}
        object.__setattr__(self, "folded", folded)

    def meaning(self, heading: str) -> Meaning | None:
        """What a heading of a sheet stands for; None where nobody knows it.

        The codebook's headings come first, exactly and then without regard to case where that is unambiguous
        (a single letter never is: F, f); canonical names always work.
        """
        exact = _spaced(heading)
        if exact in self.columns:
            return self.columns[exact]
        alike = self.folded.get(normalised(heading), frozenset())
        if len(alike) == 1 and len(exact) > 1:
            return next(iter(alike))
        for pattern, quantity in self.patterns:
            if (found := pattern.fullmatch(exact)) is not None:
                return (quantity, int(found["group"]))
        return canonical(heading)

    def decimals_of(self, variable: Variable) -> int | None:
        """Printed decimals of a variable, where the codebook says."""
        name, group = variable
        own = self.decimals.get(f"{name}_{group}")
        return self.decimals.get(name) if own is None else own


def default_codebook() -> Codebook:
    """The codebook of a sheet whose headings are quantity names."""
    return Codebook()


def _ready() -> dict[str, Traversable]:
    """Codebooks shipped with the package: inside it when installed, beside it in a source tree."""
    inside = resources.files("extractor") / "_codebooks"
    folder: Traversable = inside if inside.is_dir() else Path(__file__).resolve().parent.parent / "codebooks"
    if not folder.is_dir():
        return {}
    found = (entry for entry in folder.iterdir() if entry.name.endswith(".toml"))
    return {entry.name.removesuffix(".toml"): entry for entry in sorted(found, key=lambda entry: entry.name)}


def ready_codebooks() -> list[str]:
    """Names of the codebooks shipped with the package."""
    return list(_ready())


def load_codebook(name_or_path: str | Path) -> Codebook:
    """A ready codebook by name, or one from a file.

    Raises
    ------
    InvalidCodebook : there is no such codebook, or it breaks a rule; the message is one line.
    """
    return parse_codebook(codebook_text(name_or_path), str(name_or_path))


def codebook_text(name_or_path: str | Path) -> str:
    """The text of a ready codebook by name, or of a file.

    Raises
    ------
    InvalidCodebook : there is no such codebook, or it is no text; the message is one line.
    """
    word = str(name_or_path)
    ready = _ready()
    if word in ready:
        return _text(ready[word], word)
    path = Path(word)
    try:
        exists = path.exists()
    except (OSError, ValueError):
        exists = False
    if exists:
        return _text(path, word)
    if word.endswith(".toml") or "/" in word or "\\" in word:
        raise InvalidCodebook(f"codebook {quoted(word, 200)}: no such file")
    raise InvalidCodebook(
        f"no codebook is called {quoted(word)}; known are {', '.join(ready)}{nearest(word, ready)}; "
        f"a file of your own ends in .toml"
    )


def _text(source: Traversable, word: str) -> str:
    """The text of a codebook file."""
    if source.is_dir():
        raise InvalidCodebook(f"codebook {quoted(word, 200)} is a folder; name the .toml file in it")
    try:
        with source.open("rb") as stream:
            content = stream.read(_LARGEST + 1)
        if len(content) > _LARGEST:
            raise InvalidCodebook(f"codebook {quoted(word, 200)} is larger than 1 MiB; is it a codebook?")
        return content.decode("utf-8-sig")
    except UnicodeDecodeError as fault:
        raise InvalidCodebook(f"codebook {quoted(word, 200)} is not UTF-8 text; save it as UTF-8") from fault
    except OSError as fault:
        raise InvalidCodebook(f"codebook {quoted(word, 200)} cannot be opened: {fault.strerror}") from fault


def parse_codebook(text: str, name: str) -> Codebook:
    """A codebook from its TOML text; ``name`` is what messages call it."""
    try:
        tables: dict[str, object] = tomllib.loads(text)
    except (ValueError, RecursionError) as fault:
        # tomllib lets the errors of int() and of deep nesting through beside its own
        reason = " ".join(str(fault).split())[:200]
        raise InvalidCodebook(f"codebook {quoted(name, 200)} is not valid TOML: {reason}") from fault
    check = Checker(text, name)
    check.known(tables, _KEYS)
    columns, patterns = _columns(check, check.table(tables, "columns"))
    scale, responses = _scale(check, check.table(tables, "scale"))
    return Codebook(
        title=check.word(("title",), tables.get("title", name)),
        design=check.choice(("design",), tables["design"], DESIGNS) if "design" in tables else "",
        decimal_mark=check.choice(("decimal_mark",), tables.get("decimal_mark", "."), (".", ",")),
        rounding=check.choice(("rounding",), tables.get("rounding", "nearest"), ROUNDINGS),
        missing=_missing(check, tables.get("missing", [])),
        alpha=check.number(("alpha",), tables.get("alpha", 0.05), 1e-6, 0.5),
        columns=columns,
        patterns=patterns,
        decimals=_decimals(check, check.table(tables, "decimals")),
        assumptions=_assumptions(check, check.table(tables, "assume")),
        scale=scale,
        responses=responses,
        rename=_rename(check, check.table(tables, "rename")),
        path=name,
    )


def _missing(check: Checker, value: object) -> frozenset[str]:
    """Codes of blank cells: texts or numbers."""
    if not isinstance(value, list):
        raise check.fail(("missing",), 'must be a list such as ["NA", "-99"]')
    if not all(isinstance(code, (str, int, float)) and not isinstance(code, bool) for code in value):
        raise check.fail(("missing",), "must hold texts or numbers only")
    if any(isinstance(code, int) and abs(code) > MOST_COUNTED for code in value):
        raise check.fail(("missing",), "holds a number that no cell can hold")
    return frozenset(spelled_missing(code) for code in value)


def _columns(
    check: Checker, table: Mapping[str, object]
) -> tuple[dict[str, Meaning], tuple[tuple[re.Pattern[str], str], ...]]:
    """Meanings by heading, and expressions for headings of numbered groups."""
    columns: dict[str, Meaning] = {}
    patterns: list[tuple[re.Pattern[str], str]] = []
    known = canonical_names()
    for key, value in table.items():
        at = ("columns", key)
        meaning = canonical(key) if key == normalised(key) else None
        if meaning is None and key not in known:
            raise check.fail(at, f"is no quantity or coded fact{nearest(key, known)}")
        for heading in check.words(at, value):
            heading = _spaced(heading)
            if ("{group}" in heading) is (meaning is not None):
                rule = "is one column; write its heading without {group}"
                if meaning is None:
                    rule = f"has one column a group; write {{group}} in the heading, or a key such as {key}_1"
                raise check.fail(at, rule)
            if meaning is None:
                expression = re.escape(heading).replace(r"\{group\}", "(?P<group>[1-9][0-9]{0,3})", 1)
                patterns.append((re.compile(expression), key))
            elif columns.setdefault(heading, meaning) != meaning:
                raise check.fail(at, f"claims the heading {quoted(heading)}, which another key claims too")
    return columns, tuple(patterns)


def _decimals(check: Checker, table: Mapping[str, object]) -> dict[str, int]:
    """Printed decimals by quantity or by quantity of one group."""
    quantities = [name for name in canonical_names() if name not in FACTS]
    for key in table:
        if key not in quantities and not isinstance(canonical(key), tuple):
            raise check.fail(("decimals", key), f"is no quantity{nearest(key, quantities)}")
    return {key: check.whole(("decimals", key), value, 0, _MOST_DECIMALS) for key, value in table.items()}


def _assumptions(check: Checker, table: Mapping[str, object]) -> dict[str, Assumption]:
    """Values nobody reported; each must say who supplied it."""
    scalars = [name for name in canonical_names() if isinstance(canonical(name), tuple)]
    found: dict[str, Assumption] = {}
    for name in table:
        at = ("assume", name)
        if name not in scalars:
            raise check.fail(at, f"is no quantity of a whole row{nearest(name, scalars)}")
        entry = check.table(table, *at)
        check.known(entry, ("value", "range", "by"), at)
        for key in ("value", "by"):
            if key not in entry:
                raise check.fail(
                    (*at, key), "is missing; an assumption says its value and by whom it was supplied"
                )
        bounds = VOCABULARY[name].low, VOCABULARY[name].high
        value = check.number((*at, "value"), entry["value"], *bounds)
        by = check.word((*at, "by"), entry["by"])
        span = entry.get("range", [value, value])
        if not isinstance(span, list) or len(span) != 2:
            raise check.fail((*at, "range"), "must be two numbers such as [0.3, 0.8]")
        low, high = (check.number((*at, "range"), end, *bounds) for end in span)
        if not low <= value <= high:
            raise check.fail((*at, "range"), "must hold the value")
        given = "range" in entry
        found[name] = Assumption(value, by, low, high) if given else Assumption(value, by)
    return found


def _scale(check: Checker, table: Mapping[str, object]) -> tuple[dict[str, float], str]:
    """Bounds and items of the scale by quantity, and the kind of its responses."""
    check.known(table, ("minimum", "maximum", "items", "responses"), ("scale",))
    found: dict[str, float] = {}
    for key, quantity in (("minimum", "scale_min"), ("maximum", "scale_max")):
        if key in table:
            found[quantity] = check.number(("scale", key), table[key])
    if len(found) == 2 and found["scale_min"] >= found["scale_max"]:
        raise check.fail(("scale", "maximum"), "must be above minimum")
    if "items" in table:
        found["scale_items"] = float(check.whole(("scale", "items"), table["items"], 1, 10_000))
    if "responses" not in table:
        return found, ""
    return found, check.choice(("scale", "responses"), table["responses"], RESPONSES)


def _rename(check: Checker, table: Mapping[str, object]) -> dict[str, str]:
    """New names of effect table columns, no two alike."""
    check.known(table, EFFECT_COLUMNS, ("rename",))
    names = {key: check.word(("rename", key), value).strip() for key, value in table.items()}
    for key, name in names.items():
        others = [names.get(column, column) for column in EFFECT_COLUMNS if column != key]
        if name in others:
            raise check.fail(("rename", key), f"would give two columns the name {quoted(name)}")
    return names
