"""What a measured flute can play: single notes, scales in every key, tunes; and its tuning for a keyboard."""
