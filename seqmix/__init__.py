"""seqmix: what comes next in a log, with honest odds."""

__version__ = "0.1.0"
