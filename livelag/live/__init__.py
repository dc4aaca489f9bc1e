"""Audition: ports, clock, session, panel, take recorder."""
