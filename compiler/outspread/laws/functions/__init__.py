"""Special functions of the laws, each accurate relative to itself in both tails; no law is defined here."""
