"""Why an alert rang: its points, limits and arithmetic, derived again."""
