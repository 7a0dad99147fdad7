"""Recordings in, comparisons out: the same engine as the daemon, over files."""
