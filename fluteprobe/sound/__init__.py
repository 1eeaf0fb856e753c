"""The signal: recordings, spans, pitch, partials, breath noise. Knows no flute."""
