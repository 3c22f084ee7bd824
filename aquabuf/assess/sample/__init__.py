"""Assess samples one by one: state, buffering, calcium carbonate, quality and warnings."""
