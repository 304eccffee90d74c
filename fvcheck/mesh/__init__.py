"""Points, cells, edges, patches, reduction to the plane."""
