"""Where statements are expanded: at the top level, or inside one use of an assembly."""

from __future__ import annotations

from dataclasses import dataclass, field

from nodal.language import syntax
from nodal.language.builder import NetworkBuilder
from nodal.language.evaluate import Evaluator
from nodal.language.quantity import Quantity
from nodal.language.scope import Scope
from nodal.language.units import Dimension
from nodal.network import GROUND


@dataclass(slots=True)
class Frame:
    """One place of expansion: its scope for values, its prefix for names, its nodes, and the side it stands
    on."""

    builder: NetworkBuilder
    evaluator: Evaluator
    scope: Scope
    prefix: str = ""
    nodes: dict[str, int] = field(default_factory=dict)
    """The nodes of an assembly, by what the assembly calls them."""
    side: str = "chain"

    def node(self, word: syntax.Word) -> int:
        """A node to connect to."""
        if word.text == "ground":
            return GROUND
        index = self.nodes.get(word.text)
        if index is not None:
            return index
        if "." in word.text:
            self.evaluator.reject("inner-node", word.span, node=word.text)
        return self.builder.node(self.prefix + word.text, word.span)

    def read(self, word: syntax.Word) -> int:
        """A node to read: an existing one, inner ones included."""
        index = self.builder.find_node(word.text)
        if index is None:
            known = [*self.builder.nodes, *self.builder.aliases]
            self.evaluator.unknown("node", word.span, word.text, known)
        return index

    def plain(self, expression: syntax.Expression, dimension: Dimension) -> Quantity:
        """A value without qualifiers."""
        return self.evaluator.value(expression, self.scope, dimension)
