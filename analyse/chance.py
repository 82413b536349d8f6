"""How chance is simulated unless somebody says otherwise; apart, so that help need not load the tests."""

from detect.errors import OptionWrong

SEED = 1
SIMULATIONS = 999
FEWEST_SIMULATIONS = 99
MOST_SIMULATIONS = 1_000_000
LEVEL = 0.05  # two-sided, at which a verdict departs from random


def check_seed(seed: int) -> None:
    """Refuse a seed below 0 (OptionWrong).

    Examples
    --------
    >>> check_seed(1)
    >>> check_seed(-1)
    Traceback (most recent call last):
        ...
    detect.errors.OptionWrong: --seed must be a whole number of 0 or more, not -1.
    """
    if seed < 0:
        raise OptionWrong(f"--seed must be a whole number of 0 or more, not {seed}.")


def check_simulations(simulations: int) -> None:
    """Refuse a number of simulations that cannot judge at 5 % or would never end (OptionWrong).

    Examples
    --------
    >>> check_simulations(999)
    >>> check_simulations(20)
    Traceback (most recent call last):
        ...
    detect.errors.OptionWrong: --simulations must lie between 99 and 1,000,000, not at 20; 999 serves most purposes.
    """
    if not FEWEST_SIMULATIONS <= simulations <= MOST_SIMULATIONS:
        raise OptionWrong(
            f"--simulations must lie between {FEWEST_SIMULATIONS} and {MOST_SIMULATIONS:,},"
            f" not at {simulations}; {SIMULATIONS} serves most purposes."
        )
