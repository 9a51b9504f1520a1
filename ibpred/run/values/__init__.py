"""Numbers at points: the routes to them, expansions and limits on singularities, grids."""
