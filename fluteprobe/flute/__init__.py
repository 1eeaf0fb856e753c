"""The instrument: fingerings, notes, the tube, registers. Knows no audio."""
