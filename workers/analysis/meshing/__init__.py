"""From a geometry to a mesh."""
