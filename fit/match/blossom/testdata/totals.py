#!/usr/bin/env python3
"""Totals of matchings by networkx, for TestAgainstNetworkx.

Writes totals.csv: python3 totals.py > totals.csv

Each row is one graph, drawn by a multiplicative generator that the test repeats,
so that graphs are given by their seed alone:
  state = state * 6364136223846793005 + 1442695040888963407 mod 2^64, a number is state >> 33
for i in 0..n-1, for j in 0..i-1: a number mod 1000 below share draws the edge,
the next number mod span is its weight.
"""
import networkx as nx

MASK = (1 << 64) - 1


def graph(seed, n, share, span):
    state = seed
    g = nx.Graph()
    g.add_nodes_from(range(n))

    def number():
        nonlocal state
        state = (state * 6364136223846793005 + 1442695040888963407) & MASK
        return state >> 33

    for i in range(n):
        for j in range(i):
            if number() % 1000 < share:
                g.add_edge(i, j, weight=number() % span)
    return g


def total(g, m):
    return sum(g[u][v]["weight"] for u, v in m)


print(f"# networkx {nx.__version__}: python3 totals.py; max_weight_matching with and without")
print("# maxcardinality=True, min_weight_matching (always of greatest cardinality)")
print("seed,n,share,span,heaviest,pairs,heaviest_of_most,lightest_of_most")
for seed, (n, share, span) in enumerate(
    [(200, 1000, 1000000), (200, 1000, 10), (199, 300, 1000), (200, 100, 50), (200, 30, 1000000),
     (200, 15, 100), (200, 10, 5), (150, 500, 2), (200, 12, 1000), (101, 40, 7)], 1):
    g = graph(seed, n, share, span)
    a = nx.max_weight_matching(g)
    b = nx.max_weight_matching(g, maxcardinality=True)
    c = nx.min_weight_matching(g)
    assert len(b) == len(c)
    print(seed, n, share, span, total(g, a), len(b), total(g, b), total(g, c), sep=",", flush=True)
