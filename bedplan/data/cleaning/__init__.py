"""From rows to ward stays as they can be used: one module a family of rules, and every row accounted for."""
