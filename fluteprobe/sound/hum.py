"""Mains hum: the multiples of 50 and 60 Hz that a room or a cable adds, up to where they die away."""

MAINS_HZ = (50.0, 60.0)
HIGHEST_HZ = 400.0


def nearest_hum_hz(frequency_hz: float) -> tuple[float, ...]:
    """Return the multiple of each mains frequency nearest to a frequency; none above what hum reaches."""
    if not frequency_hz < HIGHEST_HZ:
        return ()
    return tuple(max(round(frequency_hz / mains), 1) * mains for mains in MAINS_HZ)
