"""The durable, hash-chained record of what the runtime saw, thought, said and wrote.

One SQLite file, written by one thread of one process, read by any number of
others while it grows. Once a row is committed nothing here changes or removes
it. May import `ports` and `records`; knows no other edge.

Open `chain.py` first (what the hash covers), then `store.py` (a row becomes
durable), `writer.py` (the face that the loop sees), `reader.py` and `verify.py`.
"""
