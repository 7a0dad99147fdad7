"""From subgroups in which nothing was wrong to a baseline, and whether it may be trusted."""
