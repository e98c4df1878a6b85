"""The first look at a rare event: what kind of failure region the pilot's failures belong to."""

from dataclasses import replace

import numpy as np
from scipy.special import log_ndtr

from mc.rare_descent import Descent, descent, inflated
from mc.rare_pilot import PILOT_SIZE, Pilot, annealing
from mc.rare_regions import WALKABLE, Regions, is_connected, is_round
from mc.rare_walks import plane_at

ASKED = 8  # of the pilot's failures, whether they belong to the region of a descent


def first_look(state, stream, pilot: Pilot, reserve) -> tuple[Regions, Pilot, Descent | None]:
    """The region of the pilot's failures if that is certain; the pilot, replaced where it met none; a descent if any.

    A plane near the nearest failure needs no descent, and a sphere has no direction. Where values lead on, the walks
    look for the regions even so: they come nearer to the origin than a mean does and hide less from the search.
    """
    random, none = stream("descent"), Regions.none(state.dimension)
    if pilot.reached:
        nearest = pilot.failures[np.argmin(np.linalg.norm(pilot.failures, axis=1))]
        plane, ragged = plane_at(state, random, nearest)
        if plane is not None:
            return none.joined_by(plane), pilot, None
        if is_round(state, random, pilot.failures):
            return none, pilot, None
        found = descent(state, random, pilot.failures, None, reserve)
        found = found if found is not None and found.compact else None
        if found is not None and ragged and state.dimension > WALKABLE:
            region = replace(none.joined_by(found.distance * found.normal), flat=True)
            some = pilot.failures[np.linspace(0, len(pilot.failures) - 1, ASKED).astype(int)]
            if all(is_connected(state, region, failure) for failure in some):
                return region, pilot, found
        return none, pilot, found
    failures, spread = inflated(state, random, reserve)
    curved = bool(len(failures)) and is_round(state, random, failures)
    if len(failures) and not curved:
        found = descent(state, random, failures, spread, reserve)
        if found is not None and found.compact:
            return replace(none.joined_by(found.distance * found.normal), flat=True), flat_pilot(found), found
    none = replace(none, lost=not curved and state.dimension > WALKABLE)
    return none, annealing(state, stream("annealing"), PILOT_SIZE, reserve), None


def flat_pilot(found: Descent) -> Pilot:
    """What a descent tells in place of a pilot: failures, and a first idea of the probability without an error."""
    return Pilot(
        log_probability=float(log_ndtr(-found.distance)), log_error=np.inf, failures=found.failures, reached=False
    )
