"""The neutralization engineer's questions: demand, equalization, stages, feed, and whether the design holds."""
