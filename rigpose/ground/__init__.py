"""Errors, tolerances, budgets and the words for results: what every layer above stands on."""
