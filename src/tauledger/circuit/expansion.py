"""The state of one flattening: what has been built, what was wrong, and the limits."""

from __future__ import annotations

import difflib
import re
from collections import Counter
from collections.abc import Callable, Iterable, Sequence

from tauledger.circuit.block import Block
from tauledger.circuit.elements import GROUND, Element, Model
from tauledger.circuit.evaluate import EvaluationError, evaluate
from tauledger.circuit.scope import Scope
from tauledger.netlist.codes import fault, problem
from tauledger.netlist.expression import Expression, ExpressionError, number_traps, parse_expression
from tauledger.netlist.statements import Call, Formula, Item, Statement, Word
from tauledger.problems import Problem, ProblemError, Severity, SourceSpan
from tauledger.quantity import TRAPS, parse_number, rejected_number

_MAY_BE_TRAP = re.compile(r"[0-9][A-Za-z\u03bc]")

MAXIMUM_ELEMENTS = 100_000
MAXIMUM_DEPTH = 50
"""Of subcircuit calls inside subcircuit calls."""
MAXIMUM_WORK = 3_000_000
"""Steps of the expansion, weighed so that one is about a microsecond."""
_WORK_OF_NUMBER, _WORK_OF_ARITHMETIC = 3, 10
WORK_OF_CALL, WORK_OF_CONDITIONAL_CALL, WORK_OF_DEFINITION = 40, 200, 10
MAXIMUM_PROBLEMS = 100
"""Errors in one run."""
MAXIMUM_ALIKE = 20
"""Warnings of one code that are listed."""
_MAXIMUM_SEARCHES = 20
_LONGEST_SEARCHED = 60


Substitute = Callable[[Word, Statement], tuple[Model | None, Problem]]
"""From the word that names a missing model to what stands in and the warning, or the refusal."""


class Expansion:
    """Mutable while :func:`tauledger.circuit.flatten` runs; gone afterwards."""

    def __init__(self) -> None:
        self.temperature_c = 27.0
        self.nominal_temperature_c = 27.0
        self.globals: set[str] = {GROUND, "gnd"}
        self.problems: list[Problem] = []
        self.failed: set[int] = set()
        """Statements (by id) that gave an error in one instance of a subcircuit."""
        self._reported: set[tuple[object, ...]] = set()
        self._counts: Counter[str] = Counter()
        self._omitted: Counter[str] = Counter()
        self._errors = self._work = self._searches = 0
        self._elements: list[Element | None] = []
        self._names: dict[str, Element] = {}
        self._later: list[tuple[int, Callable[[], Element]]] = []
        self._spelling: dict[str, str] = {"0": GROUND, "gnd": GROUND}
        self._expressions: dict[str, Expression] = {}
        self._calls = 0
        self.blocks: dict[int, Block] = {}
        """Of each subcircuit expanded so far, by its id."""
        self.substitute: Substitute | None = None
        """What to put in place of a missing model; None to refuse."""
        self.put_aside: Callable[[Scope, Statement, ProblemError], bool] = lambda *_: False
        """Takes what is wrong with an element, when that can wait."""
        self.directives: list[tuple[Scope, Statement]] = []
        """Dot statements met, to be read once every node is known."""

    # problems -------------------------------------------------------------------------------------

    def report(self, problems: Iterable[Problem]) -> None:
        """Add problems; the same one in every instance of a subcircuit counts once.

        Raises ProblemError with all of them when there are more errors than are listed.
        """
        for entry in problems:
            span = entry.span
            place = entry.message if span is None else (span.path, span.line, span.column)
            if (entry.code, place) in self._reported:
                continue
            self._reported.add((entry.code, place))
            if entry.severity is Severity.ERROR:
                self._errors += 1
            elif self._counts[entry.code] >= MAXIMUM_ALIKE:
                self._omitted[entry.code] += 1
                continue
            self._counts[entry.code] += 1
            self.problems.append(entry)
            if self._errors > MAXIMUM_PROBLEMS:
                raise ProblemError(
                    *self.problems,
                    problem(
                        "too-many-problems",
                        f"more than {MAXIMUM_PROBLEMS} errors; reading stopped here",
                        span,
                        "Correct the first ones, then try again.",
                    ),
                )

    def absorb(self, error: ProblemError) -> None:
        """Report what an exception carries; raises ProblemError where the work cannot go on."""
        fatal = error.problems[-1].code in _FATAL
        if fatal and len(error.problems) > 1:
            raise error  # complete: it has been here before
        self.report(error.problems)
        if fatal:
            raise ProblemError(*self.problems)

    @property
    def has_errors(self) -> bool:
        """Whether the circuit cannot be used."""
        return self._errors > 0

    def listed_problems(self, path: str) -> tuple[Problem, ...]:
        """All problems by position, those of the netlist ``path`` before those of its includes.

        One note stands for each kind of warning of which some are left out.
        """
        omitted = [
            problem("problems-omitted", f"{count} more like these: {code}", None, "")
            for code, count in self._omitted.items()
        ]
        ordered = sorted(
            self.problems,
            key=lambda entry: (
                (entry.span.path != path, entry.span.path, entry.span.line)
                if entry.span
                else (True, "", 0)
            ),
        )
        return (*ordered, *omitted)

    def count_work(self, amount: int) -> None:
        """Bound what subcircuits called many times, each with many parameters, can cost.

        ``amount`` is about microseconds. Raises ProblemError beyond :data:`MAXIMUM_WORK`.
        """
        self._work += amount
        if self._work > MAXIMUM_WORK:
            raise fault(
                "circuit-too-large",
                f"expanding takes more than {MAXIMUM_WORK} steps",
                None,
                "Analyse the amplifier alone, or a part of it.",
            )

    def near_names(self, name: str, known: Iterable[str]) -> str:
        """A clause such as ``; near it: bc547b, bc546b``, or nothing."""
        self._searches += 1
        if self._searches > _MAXIMUM_SEARCHES or len(name) > _LONGEST_SEARCHED:
            return ""
        candidates = [entry for entry in known if len(entry) <= _LONGEST_SEARCHED]
        near = difflib.get_close_matches(name.lower(), candidates[:1000], n=3)
        return f"; near it: {', '.join(near)}" if near else ""

    def warn(self, code: str, message: str, span: SourceSpan, advice: str) -> None:
        """Report one problem, of the severity that its code has."""
        self.report([problem(code, message, span, advice)])

    def leave_out(self, statement: Statement, reason: str, scope: Scope) -> None:
        """Say that an element is not in the analysis."""
        advice = "The analysis goes on without it; what depends on it will be wrong."
        if "connector" in reason:
            advice = "Attach what stands behind it in tauledger.toml: input, output, supplies."
        self.warn(
            "element-left-out",
            f"{scope.prefix}{statement.name.text} is left out: {reason}",
            statement.span(),
            advice,
        )

    # numbers --------------------------------------------------------------------------------------

    def number(self, item: Item | Call, scope: Scope, statement: Statement) -> float:
        """The value of a word, expression or parameter name, in SI units.

        Raises ProblemError where it has none.
        """
        self.count_work(_WORK_OF_NUMBER)
        if isinstance(item, Word):
            return self._word(item, scope, statement)
        if isinstance(item, Formula):
            return self.arithmetic(item.text, item, scope, statement)
        return self.arithmetic(statement.text_of(item), item, scope, statement)

    def lone_number(self, item: Item | Call, scope: Scope, statement: Statement) -> float:
        """The same where one number is due: ``4,7k`` is no 4, though commas separate in SPICE."""
        refuse_decimal_comma(item, statement)
        return self.number(item, scope, statement)

    def written_number(self, word: Word, scope: Scope, statement: Statement) -> float:
        """The same for text the grammar has not read: braces or quotes may stand round it."""
        if word.text[0] in "{'":
            return self.arithmetic(word.text[1:].rstrip("}'"), word, scope, statement)
        return self.number(word, scope, statement)

    def _word(self, word: Word, scope: Scope, statement: Statement) -> float:
        text = word.text
        if not text[0].isdigit() and (value := scope.parameters.get(text.lower())) is not None:
            return value
        number = parse_number(text)
        if number is not None:
            if number.trap:
                found, advice = TRAPS[number.trap]
                self.warn(number.trap, f"{text!r}: {found}", statement.span(word), advice)
            return number.value
        if code := rejected_number(text):
            found, advice = TRAPS[code]
            raise fault(code, f"{text!r}: {found}", statement.span(word), advice)
        if any(character in "+-*/" for character in text[1:]):
            return self.arithmetic(text, word, scope, statement)
        raise fault(
            "value-unreadable",
            f"{statement.name.text}: expected a number or a parameter, found {text!r}"
            + self.near_names(text, scope.parameters),
            statement.span(word),
            "Write a number such as 4.7k, or define it with .param.",
        )

    def arithmetic(
        self, text: str, item: Item | Call | None, scope: Scope, statement: Statement
    ) -> float:
        """The value of arithmetic text without its braces; ``item`` is where it stands.

        Raises ProblemError where it cannot be read or has no value.
        """
        self.count_work(_WORK_OF_ARITHMETIC)
        expression = self.expression(text, item, statement)
        try:
            return evaluate(expression, scope.parameters, scope.functions)
        except EvaluationError as error:
            raise unevaluable(error, item, statement) from None

    def expression(self, text: str, item: Item | Call | None, statement: Statement) -> Expression:
        """Parse arithmetic, once for the same text; raises ProblemError where it is none."""
        known = self._expressions.get(text)
        if known is not None:
            return known
        try:
            parsed = parse_expression(text)
        except ExpressionError as error:
            raise fault(
                "expression-invalid",
                f"{statement.name.text}: {error.message}",
                statement.span(item),
                "Correct the expression.",
            ) from None
        self._expressions[text] = parsed
        if item is not None and _MAY_BE_TRAP.search(text):
            self._warn_traps(text, item, statement)
        return parsed

    def _warn_traps(self, text: str, item: Item | Call, statement: Statement) -> None:
        start = item.offset + (item.end - item.offset - len(text)) // 2
        for trap in number_traps(text):
            found, advice = TRAPS[trap.trap]
            span = statement.span(Word(trap.text, start + trap.offset))
            self.warn(trap.trap, f"{trap.text!r}: {found}", span, advice)

    # nodes and elements ---------------------------------------------------------------------------

    def node(self, text: str, scope: Scope) -> str:
        """Flat name of a node as spelled in this scope."""
        known = scope.nodes.get(text)
        if known is not None:
            return known
        lower = text.lower()
        flat = scope.nodes.get(lower)
        if flat is None:
            full = text if lower in self.globals else scope.prefix + text
            flat = self._spelling.setdefault(full.lower(), full)
            scope.nodes[lower] = flat
        scope.nodes[text] = flat
        return flat

    def nodes(self, words: Sequence[Word], scope: Scope) -> tuple[str, ...]:
        """Flat names of several nodes, in their order."""
        return tuple([self.node(word.text, scope) for word in words])

    def find_node(self, name: str, scope: Scope) -> str | None:
        """Flat name of a node met so far, named from inside ``scope`` or by its full path."""
        lower = name.lower()
        return (
            scope.nodes.get(lower)
            or self._spelling.get(scope.prefix.lower() + lower)
            or self._spelling.get(lower)
        )

    def expression_node(self, name: str, scope: Scope) -> str:
        """The same for a node of an expression, which may be met there first."""
        return self.find_node(name, scope) or self.node(name, scope)

    def add(self, element: Element) -> None:
        """The next element; raises ProblemError for a name in use, or for one too many."""
        self._register(element)
        self._elements.append(element)
        self._check_size(element.span)

    def has_element(self, name: str) -> bool:
        """Whether an element of this flat name has been built, letter case ignored."""
        return name.lower() in self._names

    def add_later(self, build: Callable[[], Element], span: SourceSpan) -> None:
        """An element that names others: built in its place once all of them are known."""
        self._later.append((len(self._elements), build))
        self._elements.append(None)
        self._check_size(span)

    def count_call(self, span: SourceSpan) -> None:
        """A call counts as an element: bodies may be empty."""
        self._calls += 1
        self._check_size(span)

    def _check_size(self, span: SourceSpan) -> None:
        if len(self._elements) + self._calls > MAXIMUM_ELEMENTS:
            raise too_large(span)

    def _register(self, element: Element) -> None:
        key = element.name.lower()
        other = self._names.setdefault(key, element)
        if other is not element:
            raise fault(
                "name-duplicate",
                f"{element.name} is the name of two elements; the other stands in line "
                f"{other.span.line} of {other.span.path}",
                element.span,
                "Rename one of them.",
            )

    def element_name(
        self, name: str, scope: Scope, statement: Statement, item: Item, kind: type[Element]
    ) -> str:
        """Flat name of an element named by another; call only from :meth:`add_later`.

        Raises ProblemError when there is none of this kind.
        """
        for candidate in (scope.prefix + name, name, name.split(".", 1)[-1]):
            element = self._names.get(candidate.lower())
            if isinstance(element, kind):
                return element.name
        raise fault(
            "reference-missing",
            f"{statement.name.text}: no {_KIND_WORDS.get(kind.__name__, 'element')} {name!r}",
            statement.span(item),
            "Correct the name, or add the element.",
        )

    def finish(self) -> tuple[Element, ...]:
        """Build what was put off and return every element in file order."""
        for index, build in self._later:
            try:
                element = build()
                self._register(element)
                self._elements[index] = element
            except ProblemError as error:
                self.absorb(error)
        return tuple([element for element in self._elements if element is not None])


_FATAL = frozenset(("circuit-too-large", "too-many-problems"))
_KIND_WORDS = {"VoltageSource": "voltage source", "Inductor": "inductor"}


def ignored(run: Expansion, statement: Statement, item: Item) -> None:
    """Warn that part of a statement is not used."""
    run.warn(
        "words-ignored",
        f"{statement.name.text}: {statement.text_of(item)!r} is not used",
        statement.span(item),
        "Remove it, or correct it if it was to mean something.",
    )


def refuse_decimal_comma(item: Item | Call, statement: Statement) -> None:
    """Raise ProblemError where a comma and a digit stand right behind a number."""
    after = statement.line.text[item.end : item.end + 2]
    if isinstance(item, Word) and after[:1] == "," and after[1:].isdigit():
        found, advice = TRAPS["value-decimal-comma"]
        raise fault(
            "value-decimal-comma",
            f"{statement.name.text}: a comma and a digit follow {item.text!r}: {found}",
            statement.span(item),
            advice,
        )


def unevaluable(
    error: EvaluationError, item: Item | Call | None, statement: Statement
) -> ProblemError:
    """What to raise for an expression that names what is not there, or has no value."""
    return fault(
        "expression-invalid",
        f"{statement.name.text}: {error}",
        statement.span(item),
        "Correct the expression, or define what it names with .param or .func.",
    )


def too_large(span: SourceSpan | None) -> ProblemError:
    """What to raise where the circuit grows beyond :data:`MAXIMUM_ELEMENTS`."""
    return fault(
        "circuit-too-large",
        f"the circuit expands to more than {MAXIMUM_ELEMENTS} elements",
        span,
        "Analyse the amplifier alone, or a part of it.",
    )
