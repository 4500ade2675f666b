"""Moving stock between waters: limits, plan, correction, follow."""
