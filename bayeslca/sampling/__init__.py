"""How the posterior is computed: Gibbs, NUTS, starting points, relabelling."""
