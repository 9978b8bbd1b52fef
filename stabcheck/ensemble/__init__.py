"""Draws as arrays, first axis the draw, and where they come from: what every later step reads, in units used inside.

::

    sources     distributions, sample files   -> values of each quantity
    resolved    values                        -> elements at the epoch, the planet's, with true masses
    physical    values and elements           -> why a draw is not an orbit
    draws       all of these                  -> Ensemble
    phases      values                        -> how well each phase is known at the epoch
"""

from stabcheck.ensemble.draws import Ensemble, central, draw
from stabcheck.ensemble.phases import phase_error_deg
from stabcheck.ensemble.sources import Source, source

__all__ = ["Ensemble", "Source", "central", "draw", "phase_error_deg", "source"]
