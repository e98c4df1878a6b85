"""Delay of an inverting stage from its load and the driving device's effective current."""

from physics.current import Channel, drain_current


def effective_drive_current(half_drain: Channel, full_drain: Channel, supply):
    """Effective drive current of a switching device, mean of the two half-swing currents.

    half_drain : the channel with its threshold at a drain voltage of half the supply
    full_drain : the channel with its threshold at a drain voltage of the whole supply
    supply : supply voltage [V]
    Returns current [A], (I(V, V/2) + I(V/2, V))/2.
    Source: M. H. Na, E. J. Nowak, W. Haensch, J. Cai, IEDM 2002, p. 121 (from memory).
    """
    high = drain_current(half_drain, supply, supply / 2)
    low = drain_current(full_drain, supply / 2, supply)
    return (high + low) / 2


def stage_delay(load_capacitance, supply, effective_current):
    """Time for the driving device to move its load by half the supply.

    load_capacitance : next gates, own junctions and wire [F]
    supply : supply voltage [V]
    effective_current : see `effective_drive_current` [A], > 0
    Returns delay [s].
    Source: Na 2002; charge over current.
    """
    return load_capacitance * supply / (2 * effective_current)


def gate_capacitance(oxide_capacitance, width, length, overlap_per_width):
    """Input capacitance of one device's gate in strong inversion.

    oxide_capacitance : gate oxide capacitance [F/m^2]
    width, length : channel width and length [m]
    overlap_per_width : overlap and fringe capacitance of one side [F/m]
    Returns capacitance [F].
    Source: plate capacitance and two overlaps (common practice).
    """
    return width * (oxide_capacitance * length + 2 * overlap_per_width)
