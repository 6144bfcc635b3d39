"""Writes posts.json: reference values for the generalized Voronoi graph.

Posts of one radius stand at whole micrometres. The places equally far from three of them are the
vertices of the Voronoi diagram of their middles (scipy.spatial.Voronoi, which calls Qhull,
Barber, Dobkin & Huhdanpaa 1996), their clearance the distance to a middle less the radius.
Run with a Python that has scipy 1.10: python3 posts.py > posts.json
"""
import json
import random

import numpy as np
import scipy
from scipy.spatial import Voronoi, cKDTree

SIDE, RADIUS, CAP = 10_000_000, 60_000, 2_500_000
cases = []
for seed in range(12):
    rng = random.Random(seed)
    n = [5, 12, 25, 60][seed % 4]
    posts = []
    while len(posts) < n:
        p = (rng.randrange(300_000, SIDE - 300_000), rng.randrange(300_000, SIDE - 300_000))
        if all((p[0] - q[0]) ** 2 + (p[1] - q[1]) ** 2 > 400_000**2 for q in posts):
            posts.append(p)
    pts = np.array(posts, dtype=float)
    v = Voronoi(pts)
    d, _ = cKDTree(pts).query(v.vertices)
    out = []
    for (x, y), dist in zip(v.vertices, d):
        um = dist - RADIUS
        # Inside the floor, and below the clearance that edges are followed to.
        if 1 < x < SIDE - 1 and 1 < y < SIDE - 1 and um < CAP - 1:
            out.append([round(float(x), 3), round(float(y), 3), round(float(um), 3)])
    cases.append({"posts": posts, "vertices": sorted(out)})
print(json.dumps({"scipy": scipy.__version__, "side_um": SIDE, "radius_um": RADIUS, "cap_um": CAP, "cases": cases}))
