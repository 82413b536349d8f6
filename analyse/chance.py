"""How chance is simulated unless somebody says otherwise; apart, so that help need not load the tests."""

from detect.errors import OptionWrong

SEED = 1
SIMULATIONS = 999
FEWEST_SIMULATIONS = 99
MOST_SIMULATIONS = 1_000_000
LEVEL = 0.05  # two-sided, at which a verdict departs from random


def check_seed(seed: int) -> None:
    """Refuse a seed below 0 (OptionWrong)."""
    if seed < 0:
        raise OptionWrong(f"--seed must be a whole number of 0 or more, not {seed}.")


def check_simulations(simulations: int) -> None:
    """Refuse a number of simulations that cannot judge at 5 % or would never end (OptionWrong)."""
    if not FEWEST_SIMULATIONS <= simulations <= MOST_SIMULATIONS:
        raise OptionWrong(
            f"--simulations must lie between {FEWEST_SIMULATIONS} and {MOST_SIMULATIONS:,},"
            f" not at {simulations}; {SIMULATIONS} serves most purposes."
        )
