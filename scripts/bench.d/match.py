"""CPU time, ms, of networkx for the pairs of least total distance among 200 points of
two quantities, all 19,900 distances given in whole numbers. Writes the points to the file named
and prints time and total."""
import random
import sys
import time

import networkx as nx

r = random.Random(200)
at = [(r.randrange(100_000), r.randrange(100_000)) for _ in range(200)]
with open(sys.argv[1], "w") as f:
    f.writelines(f"{x},{y}\n" for x, y in at)
g = nx.Graph()
for i, (x, y) in enumerate(at):
    for j, (u, v) in enumerate(at[:i]):
        g.add_edge(i, j, weight=max(abs(x - u), abs(y - v)))
start = time.process_time()
m = nx.min_weight_matching(g)
print(1e3 * (time.process_time() - start), sum(g[i][j]["weight"] for i, j in m))
