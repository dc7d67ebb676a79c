"""Data come in here: files are read, dates mapped to periods, units converted, findings of the load checks made."""
