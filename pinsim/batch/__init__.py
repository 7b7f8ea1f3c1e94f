"""Many pictures at once: what they are, where they are kept, and who draws them.

frames.py   what goes into each picture, and its checksum
draw.py     one picture with its figures, as a worker makes it
spool.py    scenes that several processes read, in the memory that they share
store.py    pictures that are done, by the checksum of what went in
needs.py    the need that was stated, and the keys to sort and group by
lanes.py    who draws: this process, others beside it, or somebody's executor
run.py      which picture next, and what happens when one fails
plan_file.py, estimate.py, cluster.py, begin.py

Nothing is loaded here: a worker process sets its threads before numpy comes (begin.py).
"""
