"""The references that an arm tracks.

``motion`` is what each of them offers; ``via`` and ``table`` are two kinds; ``read`` makes a table from
CSV text; ``limits`` tells where a motion leaves an arm's limits.
"""
