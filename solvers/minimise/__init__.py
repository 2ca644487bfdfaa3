"""From a sparse program and a start to values and multipliers, or to what conflicts."""
