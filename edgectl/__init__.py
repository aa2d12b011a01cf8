"""edgectl: plant-edge advisory control for distillation columns.

The runtime reads a plant's OPC UA server, estimates what goes on inside the
column, plans with nonlinear model-predictive control and *suggests* moves.
People decide. Final authority stays with the site's safety systems and its
licensed people.

Open `runtime/loop.py` first: one cycle on one screen.
"""

__version__ = "0.1.0"
