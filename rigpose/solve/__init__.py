"""Rest pose, freedoms, the plan, and the search for every branch."""
