"""The same stage in discrete time: lag, test oscillator, level, patch; sound files."""
