"""Trees put together from others: nodes replaced, abbreviations written out, values taken to a place."""

from __future__ import annotations

from collections.abc import Callable, Collection, Mapping, Sequence

from solvers.formula.nodes import At, Name, Node, children, size, walk, with_children


class TooLargeError(Exception):
    """A formula that would have more nodes, or more of them within each other, than can be handled."""


def substitute(tree: Node, replacement: Callable[[Node], Node | None]) -> Node:
    """The tree with every node for which `replacement` gives another one replaced by it, from the top."""
    other = replacement(tree)
    if other is not None:
        return other
    return with_children(tree, tuple(substitute(part, replacement) for part in children(tree)))


def at_place(tree: Node, place: Node, side: str, independent: str, functions: Collection[str]) -> Node:
    """The value of the tree at a place: names out of `functions` become values there."""

    def value(node: Node) -> Node | None:
        match node:
            case Name(name=name, order=order) if name in functions:
                return At(name, order, place, side)
            case Name(name=name) if name == independent:
                return place
        return None

    return substitute(tree, value)


def written_out(tree: Node, where: Sequence[tuple[str, Node]]) -> Node:
    """The tree with its abbreviations written out; `where` is in an order in which each uses only earlier ones."""
    known: dict[str, Node] = {}

    def value(node: Node) -> Node | None:
        return known.get(node.name) if isinstance(node, Name) and not node.order else None

    for name, whole in where:
        known[name] = substitute(whole, value)
    return substitute(tree, value)


def depth(tree: Node) -> int:
    """How many nodes of the tree lie within each other."""
    deepest, level = 0, [tree]
    while level:
        deepest += 1
        level = [part for node in level for part in children(node)]
    return deepest


def expander(
    where: Sequence[tuple[str, Node]],
    independent: str,
    functions: Collection[str],
    rate: Callable[[Node], Node],
    *,
    nodes: int,
    levels: int,
) -> Callable[[Node], Node]:
    """What writes abbreviations out in a tree.

    `where` is in an order in which each uses only earlier ones; `rate` gives the derivative along the curve, for primes
    on an abbreviation.  The function raises TooLargeError where the result would have more than `nodes` nodes or more
    than `levels` levels.
    """
    known: dict[str, Node] = {}

    def written_out(node: Node) -> Node | None:
        if not isinstance(node, Name | At) or node.name not in known:
            return None
        tree = known[node.name]
        for _ in range(node.order):
            tree = rate(tree)
        return tree if isinstance(node, Name) else at_place(tree, node.place, node.side, independent, functions)

    def expand(tree: Node) -> Node:
        sizes = _sizes(tree, known)
        if sizes > nodes:
            raise TooLargeError(f"written out, the formula has {sizes:,} parts; the limit is {nodes:,}")
        expanded = substitute(tree, written_out)
        if depth(expanded) > levels:
            raise TooLargeError(f"written out, the formula is nested more than {levels} deep")
        return expanded

    for name, tree in where:
        known[name] = expand(tree)
    return expand


def _sizes(tree: Node, known: Mapping[str, Node]) -> int:
    """The nodes of the tree after its abbreviations are written out, without doing it."""
    plain = {name: size(expansion) for name, expansion in known.items()}
    return sum(plain.get(node.name, 1) if isinstance(node, Name | At) else 1 for node in walk(tree))
