"""HTTP in and HTTP out: parse, authenticate, authorise, answer; no rule of the trade, no SQL."""
