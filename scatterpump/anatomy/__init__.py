"""The device as the solver sees it: sites, bonds, leads, layers, and what changes with phi."""
