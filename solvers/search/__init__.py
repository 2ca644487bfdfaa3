"""From mesh to mesh: the error, the better mesh, the switches, until the tolerance is met."""
