"""The families of distributions, one concept a file; `laws.registry` collects them under their keys."""
