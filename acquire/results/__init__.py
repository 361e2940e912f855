"""Results: the quantities that a stored scan gives, each with value, unit, uncertainty, conditions and method."""
