"""The joint table of truths and decisions, by two routes."""
