"""The edge to the plant's OPC UA server: reads tags, writes advisory nodes only.

Open `session.py` first: it owns the connection that `source.py` (reads) and
`sink.py` (writes, behind the fence in `fence.py`) share. `connection.py` makes
one connection, `survey.py` looks at the nodes behind it, `fit.py` judges whether
they are what the site file says. May import `ports`, `records` and `settings`.
The only room that imports asyncua.
"""
