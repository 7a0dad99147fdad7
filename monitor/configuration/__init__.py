"""From YAML to a plan: reading it, naming every mistake, and saying what the plan will do."""
