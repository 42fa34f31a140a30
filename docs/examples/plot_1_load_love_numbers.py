"""
How the Earth gives way under a load
====================================

Water on the ground presses the ground down and moves mass inside the Earth. Three numbers for each degree of a load
say how much: :math:`h'_n` and :math:`l'_n` the displacement up and along, :math:`k'_n` the change of the potential.
"""

import numpy as np
from matplotlib.figure import Figure

import massfit

love = massfit.love_numbers(max_degree=200)
for degree in (2, 10, 100):
    print(f"degree {degree:3d}: h' {love.h[degree]:7.3f}  l' {love.l[degree]:6.3f}  k' {love.k[degree]:7.4f}")

# %%
# The sea level that a load makes of itself at degree :math:`n` is proportional to :math:`(1 + k'_n - h'_n) / (2n +
# 1)`: water draws water, and the ground sinks below it. At degree 1 the numbers depend on the origin of coordinates,
# this sum does not.

degrees = np.arange(1, 201)
factor = 3.0 * 1025.0 / 5514.0 * (1.0 + love.k - love.h)[1:201] / (2 * degrees + 1)
figure = Figure(figsize=(6.0, 3.0), layout="constrained")
axes = figure.subplots()
axes.loglog(degrees, factor, color="#0072B2")
axes.set_xticks([1, 10, 100], ["1", "10", "100"])
axes.set_yticks([0.01, 0.1], ["0.01", "0.1"])
axes.set(xlabel="degree", ylabel="own sea level / load", title="Sea level that sea water makes of itself")

for frame in ("CE", "CM", "CF"):
    one = massfit.love_numbers(max_degree=2, frame=frame)
    print(f"{frame}: h'_1 {one.h[1]:7.4f}, 1 + k'_1 - h'_1 = {1.0 + one.k[1] - one.h[1]:.6f}")
