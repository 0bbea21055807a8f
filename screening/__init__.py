"""Train, calibrate, score, limit, rank and report candidates built by ``features``."""
