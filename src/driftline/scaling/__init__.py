"""The mathematics of a collapse: lengths, trajectories, ansätze, priors and the marginal likelihood."""
