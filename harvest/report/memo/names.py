"""Every name in a template is checked before anything is computed: what it names must be a value of a memo."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import TYPE_CHECKING, Any

from harvest.errors import InputError
from harvest.model.case import nearest_name
from harvest.report.memo.values import Known

if TYPE_CHECKING:
    from jinja2 import nodes

SAME_SHAPE = ("sort", "list", "reverse", "selectattr", "rejectattr", "select", "reject", "unique")
ONE_OF = ("first", "last")
OF_NUMBERS = ("digits", "percent", "whole", "share_of", "each")

LONGEST_LIST = 150
"""Signs of a list of names up to which a message gives it."""

Scope = dict[str, Known | None]
"""Names that can be used, with what is known of each; None where nothing is."""


class Names:
    """Checks every name and every attribute path of a template and those it includes."""

    def __init__(self, parsed: Callable[[str], nodes.Template], always: set[str]) -> None:
        """`parsed` gives the tree of a template by name; `always` are names that every template has."""
        self.parsed = parsed
        self.always = always
        self.open: list[str] = []

    def check(self, name: str, scope: Scope) -> None:
        """Check a template and what it includes; raises InputError with template, line and name."""
        if name in self.open:
            raise InputError(f"template {name}: includes itself")
        self.open.append(name)
        for node in self.parsed(name).body:
            self._visit(node, scope)
        self.open.pop()

    def _fault(self, node: nodes.Node, text: str) -> InputError:
        return InputError(f"template {self.open[-1]}:{node.lineno}: {text}")

    def _visit(self, node: Any, scope: Scope) -> None:
        visitor = getattr(self, f"_visit_{type(node).__name__.lower()}", None)
        if visitor is not None:
            visitor(node, scope)
        else:
            self._inside(node, scope)

    def _inside(self, node: nodes.Node, scope: Scope) -> None:
        for child in node.iter_child_nodes():
            self._visit(child, scope)

    def _visit_name(self, node: Any, scope: Scope) -> None:
        if node.ctx != "load":
            scope[node.name] = None
        elif node.name not in scope and node.name not in self.always:
            raise self._fault(node, _unknown(node.name, scope))

    def _visit_getattr(self, node: Any, scope: Scope) -> None:
        self._visit(node.node, scope)
        shape = self._shape(node.node, scope)
        if shape is None:
            return
        if shape.many:
            raise self._fault(node, f"{_dotted(node.node)} is a list; go through it with for")
        if node.attr not in (shape.inside or {}):
            raise self._fault(node, f"{_dotted(node.node)} has no {_unknown(node.attr, shape.inside or {})}")

    def _visit_for(self, node: Any, scope: Scope) -> None:
        self._visit(node.iter, scope)
        within = {**scope, "loop": None}
        self._bind(node.target, _element(self._shape(node.iter, scope)), within)
        for part in (*([node.test] if node.test is not None else []), *node.body):
            self._visit(part, within)
        for part in node.else_:
            self._visit(part, scope)

    def _bind(self, target: Any, shape: Known | None, scope: Scope) -> None:
        names = [target.name] if hasattr(target, "name") else [each.name for each in getattr(target, "items", [])]
        scope.update(dict.fromkeys(names, shape if len(names) == 1 else None))

    def _visit_assign(self, node: Any, scope: Scope) -> None:
        self._visit(node.node, scope)
        self._bind(node.target, self._shape(node.node, scope), scope)

    def _visit_assignblock(self, node: Any, scope: Scope) -> None:
        for part in node.body:
            self._visit(part, dict(scope))
        self._bind(node.target, None, scope)

    def _visit_macro(self, node: Any, scope: Scope) -> None:
        scope[node.name] = None
        within = {**scope, **dict.fromkeys(("caller", "varargs", "kwargs"))}
        self._of_macro(node, within)

    def _of_macro(self, node: Any, within: Scope) -> None:
        for default in node.defaults:
            self._visit(default, within)
        within.update({argument.name: None for argument in node.args})
        for part in node.body:
            self._visit(part, within)

    def _visit_callblock(self, node: Any, scope: Scope) -> None:
        self._visit(node.call, scope)
        self._of_macro(node, dict(scope))

    def _visit_block(self, node: Any, scope: Scope) -> None:
        for part in node.body:
            self._visit(part, {**scope, "super": None})

    def _visit_with(self, node: Any, scope: Scope) -> None:
        within = dict(scope)
        for target, value in zip(node.targets, node.values, strict=True):
            self._visit(value, scope)
            self._bind(target, self._shape(value, scope), within)
        for part in node.body:
            self._visit(part, within)

    def _visit_include(self, node: Any, scope: Scope) -> None:
        self.check(self._written(node), scope)

    def _visit_extends(self, node: Any, scope: Scope) -> None:
        self.check(self._written(node), scope)

    def _visit_import(self, node: Any, scope: Scope) -> None:
        self.check(self._written(node), dict(scope) if node.with_context else {})
        scope[node.target] = None

    def _visit_fromimport(self, node: Any, scope: Scope) -> None:
        self.check(self._written(node), dict(scope) if node.with_context else {})
        for name in node.names:
            scope[name if isinstance(name, str) else name[1]] = None

    def _written(self, node: Any) -> str:
        name = getattr(node.template, "value", None)
        if not isinstance(name, str):
            raise self._fault(node, "the name of an included template is to be written out")
        return name

    def _shape(self, node: Any, scope: Scope) -> Known | None:
        """What is known of an expression's value; None where nothing is."""
        kind = type(node).__name__
        if kind == "Name":
            return scope.get(node.name)
        if kind == "Getattr":
            shape = self._shape(node.node, scope)
            return (shape.inside or {}).get(node.attr) if shape is not None and not shape.many else None
        if kind == "Getitem":
            return _element(self._shape(node.node, scope))
        if kind == "Filter" and node.name in SAME_SHAPE + OF_NUMBERS:
            return self._shape(node.node, scope)
        if kind == "Filter" and node.name in ONE_OF:
            return _element(self._shape(node.node, scope))
        return None


def _element(shape: Known | None) -> Known | None:
    return Known(shape.meaning, shape.unit, shape.inside) if shape is not None and shape.many else None


def _unknown(name: str, known: Mapping[str, Any]) -> str:
    near = nearest_name(name, list(known)) if known else "it is a plain text or number"
    return f"{name!r}: {near}" if len(near) < LONGEST_LIST else f"{name!r}; docs/memo-values.md lists the values"


def _dotted(node: Any) -> str:
    kind = type(node).__name__
    if kind == "Getattr":
        return f"{_dotted(node.node)}.{node.attr}"
    return str(node.name) if kind == "Name" else "this"
