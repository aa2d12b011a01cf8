"""One cycle after another: reads, asks, decides, journals, publishes.

Open `loop.py` first (one cycle on one screen), then `supervise.py` (cycle after
cycle, and the end). `loop` knows `ports`, `records` and `cycle` only;
`startup.py` alone knows every edge.
"""
