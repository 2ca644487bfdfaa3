"""From a problem and a mesh to a sparse program with exact derivatives."""
