"""How chance is simulated unless somebody says otherwise; apart, so that help need not load the tests."""

SEED = 1
SIMULATIONS = 999
FEWEST_SIMULATIONS = 99
MOST_SIMULATIONS = 1_000_000
