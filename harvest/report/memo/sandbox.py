"""Jinja2 in a sandbox: only declared values have attributes, and work and output are counted."""

from __future__ import annotations

import dataclasses
import time
from collections.abc import Callable, Iterable, Iterator
from typing import Any

from jinja2 import BaseLoader, StrictUndefined, TemplateRuntimeError, TemplateSyntaxError, Undefined, nodes
from jinja2.environment import TemplateModule
from jinja2.runtime import LoopContext, markup_join, str_join
from jinja2.sandbox import ImmutableSandboxedEnvironment
from jinja2.utils import Namespace
from jinja2.visitor import NodeTransformer

from harvest.report.memo.values import CodeText, Drawing, Group, Said, Value

MOST_WORK = 5_000_000
"""Loop passes, calls and signs that a template may take; the standard memo takes some ten thousand."""
LONGEST = 10.0
"""Seconds that a template may take."""
LARGEST_NUMBER = 1e300
KEPT_GLOBALS = ("range", "namespace", "joiner")
KEPT_FILTERS = (
    *("abs", "capitalize", "count", "default", "first", "float", "int", "last", "length", "list", "lower"),
    *("map", "max", "min", "reject", "rejectattr", "reverse", "round", "select", "selectattr", "sort", "string"),
    *("title", "trim", "unique", "upper"),
)
CONTENTS = "harvest.report.memo.contents"
"""Module whose dataclasses are values of a memo."""


class TooMuchError(Exception):
    """A template does more than a memo needs."""


class Budget:
    """Work that a template may still do."""

    def __init__(self) -> None:
        self.begin()

    def begin(self) -> None:
        """Set the clock and the work to their full amount."""
        self.left = MOST_WORK
        self.until = time.monotonic() + LONGEST

    def spend(self, amount: int) -> None:
        """Take from what is left; raises TooMuchError where nothing is."""
        self.left -= amount
        if self.left < 0 or time.monotonic() > self.until:
            raise TooMuchError("takes more work or gives more text than any memo needs")

    def passes(self, items: Iterable[Any], cost: int) -> Iterator[Any]:
        """Items of a loop, each pass paid for."""
        for item in items:
            self.spend(cost)
            yield item


class _Counted(NodeTransformer):
    """Sends loops, lists and joined texts through the budget; an `if` without `else` gives nothing."""

    def visit_For(self, node: nodes.For) -> nodes.Node:  # noqa: N802 - the name that Jinja2 looks for
        self.generic_visit(node)
        if node.recursive:
            raise TemplateSyntaxError("recursive loops are not available", node.lineno)
        cost = 1 + sum(len(each.data) for each in node.find_all(nodes.TemplateData))
        node.iter = nodes.Filter(node.iter, "_passes", [nodes.Const(cost)], [], None, None, lineno=node.lineno)
        return node

    def visit_Concat(self, node: nodes.Concat) -> nodes.Node:  # noqa: N802
        self.generic_visit(node)
        parts = nodes.List(node.nodes, lineno=node.lineno)
        return nodes.Filter(parts, "_joined", [], [], None, None, lineno=node.lineno)

    def visit_List(self, node: nodes.List) -> nodes.Node:  # noqa: N802
        self.generic_visit(node)
        return nodes.Filter(node, "_built", [], [], None, None, lineno=node.lineno)

    def visit_Tuple(self, node: nodes.Tuple) -> nodes.Node:  # noqa: N802
        self.generic_visit(node)
        stored = node.ctx == "store"
        return node if stored else nodes.Filter(node, "_built", [], [], None, None, lineno=node.lineno)

    def visit_Dict(self, node: nodes.Dict) -> nodes.Node:  # noqa: N802
        self.generic_visit(node)
        return nodes.Filter(node, "_built", [], [], None, None, lineno=node.lineno)

    def visit_CondExpr(self, node: nodes.CondExpr) -> nodes.Node:  # noqa: N802
        self.generic_visit(node)
        node.expr2 = nodes.Const("", lineno=node.lineno) if node.expr2 is None else node.expr2
        return node


class Sandbox(ImmutableSandboxedEnvironment):
    """An environment for the templates of one memo."""

    intercepted_binops = frozenset(["+", "-", "*", "/", "//", "%", "**"])

    def __init__(self, loader: BaseLoader, inserted: Callable[[Any], Any], *, html: bool) -> None:
        """`inserted` turns a value that a template prints into text; `html` escapes texts for HTML."""
        super().__init__(
            loader=loader,
            undefined=StrictUndefined,
            autoescape=html,
            finalize=self.printed,
            trim_blocks=True,
            lstrip_blocks=True,
            keep_trailing_newline=True,
        )
        self.inserted = inserted
        self.budget = Budget()
        self.globals = {name: self.globals[name] for name in KEPT_GLOBALS}
        own = {"join": self.join, "_joined": self.joined, "_passes": self.passes, "_built": self.built}
        self.filters = {**{name: self.filters[name] for name in KEPT_FILTERS}, **own, **VALUE_FILTERS}

    def compile(
        self, source: Any, name: str | None = None, filename: str | None = None, *more: Any, **named: Any
    ) -> Any:
        """Compile a template with its loops and joins counted."""
        tree = self.parse(source, name, filename) if isinstance(source, str) else source
        return super().compile(_Counted().visit(tree), name, filename, *more, **named)

    def is_safe_attribute(self, obj: Any, attr: str, value: Any) -> bool:
        """Only values of a memo, and what belongs to the language of templates, have attributes."""
        of_memo = isinstance(obj, Group | Value | Said | Drawing | CodeText) or type(obj).__module__ == CONTENTS
        of_language = isinstance(obj, LoopContext | Namespace | TemplateModule)
        allowed = of_language or (of_memo and not callable(value))
        return allowed and super().is_safe_attribute(obj, attr, value)

    def wrap_str_format(self, value: Any) -> None:
        """Offer no `format` of texts either: a width in it takes any amount of memory."""

    def call(self, *arguments: Any, **named: Any) -> Any:
        """Call what a template may call, counted."""
        self.budget.spend(10)
        return super().call(*arguments, **named)

    def call_binop(self, context: Any, operator: str, left: Any, right: Any) -> Any:
        """Reckon with numbers, within bounds."""
        self.budget.spend(1)
        if not all(isinstance(each, int | float) for each in (left, right)):
            raise TooMuchError(f"{operator} works on numbers; take .raw of a value, and join texts by ~")
        if operator == "**" and (abs(right) > 100 or abs(left) > 1e6):
            raise TooMuchError("a power of this size is not available")
        result = super().call_binop(context, operator, left, right)
        if abs(result) > LARGEST_NUMBER:
            raise TooMuchError("the number is too large")
        return result

    def passes(self, items: Iterable[Any], cost: int) -> Iterator[Any]:
        """Items of a loop, counted."""
        return self.budget.passes(items, cost)

    def built(self, made: Any) -> Any:
        """A list that a template writes down, paid for with all that is in it, however often."""
        waiting = [made]
        while waiting:
            each = waiting.pop()
            self.budget.spend(1 + len(each) if isinstance(each, str) else 1)
            waiting += each.values() if isinstance(each, dict) else each if isinstance(each, list | tuple) else ()
        return made

    def joined(self, parts: list[Any]) -> str:
        """One text of several, counted."""
        self.budget.spend(sum(len(str(part)) for part in parts))
        return markup_join(parts) if self.autoescape else str_join(parts)

    def join(self, parts: Iterable[Any], separator: str = "") -> str:
        """Texts with a separator between, counted."""
        pieces: list[Any] = []
        for part in parts:
            pieces += [separator, part] if pieces else [part]
            self.budget.spend(len(str(part)) + len(separator))
        return self.joined(pieces)

    def printed(self, piece: Any) -> Any:
        """What stands for a piece that a template prints."""
        if isinstance(piece, Undefined):
            str(piece)  # raises with its name
        self.budget.spend(1 + len(piece) if isinstance(piece, str) else 100)
        if not isinstance(piece, str | bool | int | float | Value | Said | Drawing | CodeText):
            raise TemplateRuntimeError("a value that is not there, or a group or list of values, is no text")
        return self.inserted(piece)


def _with(**changes: Any) -> Callable[[Value], Value]:
    return lambda value: dataclasses.replace(value, **changes)


def _digits(value: Value, digits: int) -> Value:
    return dataclasses.replace(value, digits=max(1, min(int(digits), 15)))


VALUE_FILTERS: dict[str, Callable[..., Value]] = {
    "digits": _digits,
    "percent": _with(style="percent"),
    "whole": _with(style="whole"),
    "share_of": Value.over,
    "each": Value.each,
}
"""Filters on numbers, beside those of Jinja2."""
