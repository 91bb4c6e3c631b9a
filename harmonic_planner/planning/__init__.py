"""The whole job, from a scenario to a plan."""
