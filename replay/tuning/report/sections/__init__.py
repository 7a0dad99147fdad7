"""The report's answers: one module a question of its reader."""
