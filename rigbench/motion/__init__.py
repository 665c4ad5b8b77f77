"""The references that an arm tracks.

``motion`` is what each of them offers; ``via``, ``table``, ``path`` and ``chained`` are the kinds. ``read``
makes a table from CSV text; ``curve``, ``reach`` and ``follow`` lead the tool point along a path;
``quintic`` is the time law of a leg; ``limits`` tells where a motion leaves an arm's limits.
"""
