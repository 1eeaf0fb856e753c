"""Music on paper and on disk, by open standards: tunes in, a measured scale and its tuning out.

MusicXML 4.0 (W3C Community Group report, 2021), Standard MIDI Files 1.0 (RP-001) and the MIDI Tuning
Standard. It takes and gives bytes and plain notes, and knows no flute.
"""
