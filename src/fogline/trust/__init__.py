"""What may be trusted of a fit, and what more data would bring."""
