"""Formulas of a steady ward: Erlang's and their relatives, groups of patients, rates that are not known exactly."""
