"""gnssmon: is this GNSS antenna well installed? The answer, from the receiver's NMEA stream alone."""

__version__ = "0.1.0"
