"""The checks, grouped by what they look at. Each is one small function; see :mod:`shpb.trust.judge`."""
