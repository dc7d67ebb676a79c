"""Findings: what the estimates say, row by row. Date weights and stacked influence, no estimator of its own."""
