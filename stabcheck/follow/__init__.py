"""One draw followed in detail: what it came to, time series, angles, plots, a state to begin from elsewhere."""

from stabcheck.follow.followed import Followed
from stabcheck.follow.one import follow

__all__ = ["Followed", "follow"]
