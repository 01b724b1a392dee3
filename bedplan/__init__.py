"""bedplan: how many staffed beds each ward needs, from its own records.

records (data) -> demand -> model -> bed curve (models) -> decision (decision) -> justification (export); pages show it.
"""
