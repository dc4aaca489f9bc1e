"""livelag: hear the glide stage of an analog synthesizer before building it."""

__version__ = "0.1.0"
