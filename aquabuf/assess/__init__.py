"""The questions that users ask, answered with rules and uncertainty."""
