"""The wedge: blocks, levels, exact geometry, halos, coordinates, sampling, the demo disc."""
