"""Tables and files. Nothing here computes a statistic."""
