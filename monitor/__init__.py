"""driftbell: watches in-line gauges and rings when, and only when, something has changed."""
