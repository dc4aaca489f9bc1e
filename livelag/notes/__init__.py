"""The player: MIDI messages and files, held keys turned into key volts and gate, phrases."""
