"""The charts of the report, built with plotly: one module a chart."""
