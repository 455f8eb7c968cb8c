"""networkx graphs there and back: the interaction graph of a quadratic model, the factor graph of any model."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, TypeAlias

from hubokit.errors import InputError
from hubokit.model.hamiltonian import Hamiltonian
from hubokit.model.numbers import as_fraction

if TYPE_CHECKING:
    import networkx as nx

    Graph: TypeAlias = nx.Graph[Any]


def to_interaction_graph(model: Hamiltonian) -> Graph:
    """One node a variable, an edge for each pair that stands together in a term.

    Nodes carry ``field`` and edges of pair terms ``coupling`` (Fractions, energy units); edges that come from larger
    products carry ``terms``, their number. The graph carries ``domain``, ``convention`` and ``constant``.

    Parameters
    ----------
    model : Hamiltonian
        Any locality; only a quadratic one can be read back (`from_interaction_graph`).

    Examples
    --------
    >>> G = to_interaction_graph(Hamiltonian({("a", "b"): "1/2", ("a",): 3}, "spin"))
    >>> G.edges["a", "b"]["coupling"], G.nodes["a"]["field"]
    (Fraction(1, 2), Fraction(3, 1))
    """
    import itertools

    import networkx as nx

    graph: Graph = nx.Graph(domain=model.domain, convention=model.convention, constant=model.constant)
    graph.add_nodes_from(model.labels)
    for key, value in model.terms():
        if len(key) == 1:
            graph.nodes[key[0]]["field"] = value
        elif len(key) == 2:
            graph.add_edge(*key)
            graph.edges[key]["coupling"] = value
        for pair in itertools.combinations(key, 2) if len(key) > 2 else ():
            graph.add_edge(*pair)
            graph.edges[pair]["terms"] = graph.edges[pair].get("terms", 0) + 1
    return graph


def from_interaction_graph(graph: Graph, domain: str | None = None) -> Hamiltonian:
    """A quadratic model from a graph with ``field`` on nodes and ``coupling`` (or ``weight``) on edges.

    Parameters
    ----------
    graph : networkx.Graph
        Nodes become strings; self-loops are refused.
    domain : "spin" or "boolean", optional
        By default what the graph carries.

    Raises
    ------
    InputError
        No domain, an edge without coupling, a self-loop, or two nodes with the same name as strings.

    Examples
    --------
    >>> import networkx as nx
    >>> G = nx.Graph()
    >>> G.add_edge(1, 2, coupling=-1)
    >>> from_interaction_graph(G, "spin").terms()
    [(('1', '2'), Fraction(-1, 1))]
    """
    domain = domain or graph.graph.get("domain")
    if domain is None:
        raise InputError('the graph does not say its domain; give "spin" or "boolean"', "domain")
    names = {node: str(node) for node in graph.nodes}
    if len(set(names.values())) < len(names):
        raise InputError("two nodes have the same name as strings; relabel them first")
    coefficients: dict[tuple[str, ...], Any] = {}
    if graph.graph.get("constant"):
        coefficients[()] = graph.graph["constant"]
    for node, facts in graph.nodes(data=True):
        if facts.get("field"):
            coefficients[(names[node],)] = as_fraction(facts["field"], f"field of {names[node]}")
    for first, second, facts in graph.edges(data=True):
        place = f"edge {names[first]} {names[second]}"
        value = facts.get("coupling", facts.get("weight"))
        if facts.get("terms") is not None:
            raise InputError("the edge comes from a product of more than two variables; take the factor graph", place)
        if first == second or value is None:
            raise InputError("an edge joins two nodes and carries a coupling", place)
        coefficients[(names[first], names[second])] = as_fraction(value, place)
    convention = graph.graph.get("convention", "1-2x")
    return Hamiltonian(coefficients, domain, labels=list(names.values()), convention=convention)


def to_factor_graph(model: Hamiltonian) -> Graph:
    """A bipartite graph: one node a variable, ``("term", i)`` for each term, joined to its members.

    Term nodes carry ``coefficient``; ``bipartite`` is 0 for variables and 1 for terms.

    Examples
    --------
    >>> G = to_factor_graph(Hamiltonian({("a", "b", "c"): 2}, "boolean"))
    >>> sorted(G.neighbors(("term", 0))), G.nodes[("term", 0)]["coefficient"]
    (['a', 'b', 'c'], Fraction(2, 1))
    """
    import networkx as nx

    graph: Graph = nx.Graph(domain=model.domain, convention=model.convention, constant=model.constant)
    graph.add_nodes_from(model.labels, bipartite=0)
    for number, (key, value) in enumerate(term for term in model.terms() if term[0]):
        graph.add_node(("term", number), bipartite=1, coefficient=value)
        graph.add_edges_from((("term", number), label) for label in key)
    return graph


def from_factor_graph(graph: Graph) -> Hamiltonian:
    """The model of a factor graph as `to_factor_graph` makes it.

    Raises
    ------
    InputError
        The graph does not say its domain, or a term has no coefficient.

    Examples
    --------
    >>> H = Hamiltonian({("a", "b", "c"): 2, (): 1}, "boolean")
    >>> from_factor_graph(to_factor_graph(H)) == H
    True
    """
    if "domain" not in graph.graph:
        raise InputError("the graph does not say its domain", "domain")
    labels = [node for node, facts in graph.nodes(data=True) if facts.get("bipartite") == 0]
    coefficients: dict[tuple[str, ...], Any] = {(): graph.graph.get("constant", 0)}
    for node, facts in graph.nodes(data=True):
        if facts.get("bipartite") == 1:
            if "coefficient" not in facts:
                raise InputError("the term has no coefficient", str(node))
            key = tuple(sorted(graph.neighbors(node)))
            coefficients[key] = coefficients.get(key, 0) + as_fraction(facts["coefficient"], str(node))
    convention = graph.graph.get("convention", "1-2x")
    return Hamiltonian(coefficients, graph.graph["domain"], labels=labels, convention=convention)
