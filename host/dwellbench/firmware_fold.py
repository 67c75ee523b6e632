"""Constants of the firmware's modules put where they are used, before it is compiled for the board.

MicroPython's compiler folds `const` within one module only, and keeps every public one as an entry of the module besides. The
firmware names its codes in one module and uses them in thirty, so on the board each use would be a look-up and each name an
object of the heap. Here every constant whole number becomes a literal, across modules; its assignment and its import go. What
is left means the same: a test runs both and compares their bytes on the wire.

Also left out: words for people only (docstrings), and methods whose whole body is `raise NotImplementedError`, which say what a
subclass must have.
"""

from __future__ import annotations

import ast
from dataclasses import dataclass, field

from dwellbench.errors import BugError

_Consts = dict[str, int]


@dataclass
class _Module:
    """One source file: its tree, the constants it defines, and those it takes from others (name here: module, name there)."""

    tree: ast.Module
    own: _Consts = field(default_factory=dict)
    taken: dict[str, tuple[str, str]] = field(default_factory=dict)

    def known(self, modules: dict[str, _Module]) -> _Consts:
        """Every constant by the name it has here."""
        values = dict(self.own)
        for here, (module, there) in self.taken.items():
            if module in modules and there in modules[module].own:
                values[here] = modules[module].own[there]
        return values


def fold(sources: dict[str, str]) -> dict[str, str]:
    """Return the same modules (dotted name: source text) with constants folded. BugError where a name means two things."""
    modules = {name: _Module(ast.parse(text)) for name, text in sources.items()}
    for name, module in modules.items():
        module.taken = _imports(module.tree, name)
    while any(_find(module, module.known(modules)) for module in modules.values()):
        pass
    return {name: _rewrite(name, module, module.known(modules)) for name, module in modules.items()}


def _imports(tree: ast.Module, name: str) -> dict[str, tuple[str, str]]:
    taken = {}
    for node in tree.body:
        if isinstance(node, ast.ImportFrom):
            for alias in node.names:
                taken[alias.asname or alias.name] = (_source(name, node), alias.name)
    return taken


def _source(name: str, node: ast.ImportFrom) -> str:
    """The dotted name of the module that `node`, in the module `name`, imports from. Packages are named without __init__."""
    if not node.level:
        return node.module or ""
    package = name.split(".")[: -node.level]
    return ".".join([*package, *([node.module] if node.module else [])])


# ---- finding


def _find(module: _Module, known: _Consts) -> bool:
    """Take up constants that can be worked out by now; say whether there were any."""
    found = False
    for node in module.tree.body:
        target = _constant_name(node)
        if target is None or target in module.own:
            continue
        value = _value(_inside(node), known)
        if value is not None:
            module.own[target] = known[target] = value
            found = True
    return found


def _constant_name(node: ast.stmt) -> str | None:
    if isinstance(node, ast.Assign) and len(node.targets) == 1 and isinstance(node.targets[0], ast.Name):
        return node.targets[0].id
    return None


def _inside(node: ast.stmt) -> ast.expr:
    """The expression assigned; of `const(...)`, what stands inside."""
    assert isinstance(node, ast.Assign)
    value = node.value
    if isinstance(value, ast.Call) and isinstance(value.func, ast.Name) and value.func.id == "const":
        return value.args[0]
    return value


_ARITHMETIC = (ast.Add, ast.Sub, ast.Mult, ast.FloorDiv, ast.Mod, ast.Pow)
_BITS = (ast.LShift, ast.RShift, ast.BitOr, ast.BitAnd, ast.BitXor)


def _value(node: ast.expr, known: _Consts) -> int | None:
    """What whole number an expression is, None when it is something else or not known yet."""
    if isinstance(node, ast.Constant):
        return node.value if type(node.value) is int else None
    if isinstance(node, ast.Name):
        return known.get(node.id)
    if isinstance(node, ast.UnaryOp) and isinstance(node.op, (ast.USub, ast.Invert)):
        inner = _value(node.operand, known)
        return None if inner is None else -inner if isinstance(node.op, ast.USub) else ~inner
    if isinstance(node, ast.BinOp) and isinstance(node.op, (*_ARITHMETIC, *_BITS)):
        left, right = _value(node.left, known), _value(node.right, known)
        if left is None or right is None:
            return None
        whole = ast.Expression(ast.BinOp(ast.Constant(left), node.op, ast.Constant(right)))
        return int(
            eval(compile(ast.fix_missing_locations(whole), "<constant>", "eval"), {"__builtins__": {}})
        )
    return None


# ---- rewriting


def _binds(node: ast.AST) -> list[str]:
    """The names that a node gives a meaning."""
    if isinstance(node, ast.Name):
        return [] if isinstance(node.ctx, ast.Load) else [node.id]
    if isinstance(node, ast.arg):
        return [node.arg]
    if isinstance(node, (ast.FunctionDef, ast.ClassDef)) or (
        isinstance(node, ast.ExceptHandler) and node.name
    ):
        return [str(node.name)]
    if isinstance(node, (ast.Import, ast.ImportFrom)):
        return [alias.asname or alias.name for alias in node.names]
    return node.names if isinstance(node, ast.Global) else []


class _Fold(ast.NodeTransformer):
    """Puts literals in, and takes out what then has no use."""

    def __init__(self, known: _Consts) -> None:
        self.known = known

    def visit_Name(self, node: ast.Name) -> ast.expr:
        if node.id not in self.known:
            return node
        return ast.copy_location(ast.Constant(self.known[node.id]), node)

    def visit_BinOp(self, node: ast.BinOp) -> ast.expr:
        value = _value(node, self.known)
        if value is not None:
            return ast.copy_location(ast.Constant(value), node)
        self.generic_visit(node)
        return node

    def visit_Assign(self, node: ast.Assign) -> ast.Assign | None:
        if node.col_offset == 0 and _constant_name(node) in self.known:
            return None
        self.generic_visit(node)
        return node

    def visit_ImportFrom(self, node: ast.ImportFrom) -> ast.ImportFrom | None:
        node.names = [alias for alias in node.names if not self._useless(node, alias.asname or alias.name)]
        return node if node.names else None

    def _useless(self, node: ast.ImportFrom, name: str) -> bool:
        return name in self.known or (name == "const" and node.level > 0)

    def visit_FunctionDef(self, node: ast.FunctionDef) -> ast.FunctionDef | None:
        body = _without_words(node.body)
        if (
            len(body) == 1
            and isinstance(body[0], ast.Raise)
            and ast.unparse(body[0]) == "raise NotImplementedError"
        ):
            return None
        node.body = body or [ast.Pass()]
        self.generic_visit(node)
        return node

    def visit_ClassDef(self, node: ast.ClassDef) -> ast.ClassDef:
        node.body = _without_words(node.body)
        self.generic_visit(node)
        node.body = node.body or [ast.Pass()]
        return node


def _without_words(body: list[ast.stmt]) -> list[ast.stmt]:
    first = body[0]
    if (
        isinstance(first, ast.Expr)
        and isinstance(first.value, ast.Constant)
        and isinstance(first.value.value, str)
    ):
        return body[1:]
    return body


def _rewrite(name: str, module: _Module, known: _Consts) -> str:
    """The module's text with every constant of `known` in its place."""
    tree = module.tree
    bound = [found for node in ast.walk(tree) for found in _binds(node)]
    for constant in known:
        if bound.count(constant) > 1:
            raise BugError(f"{name}: {constant} is a constant and is bound to something else as well.")
    tree.body = _without_words(tree.body) if tree.body else []
    folded = _Fold(known).visit(tree)
    return ast.unparse(ast.fix_missing_locations(folded)) + "\n"
