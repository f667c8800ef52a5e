"""Watching a folder into which a scope writes: what has landed, whose it is, what came of it, what to do next.

Nothing in here prints or asks; :mod:`shpb.cli.watch` does.
"""
