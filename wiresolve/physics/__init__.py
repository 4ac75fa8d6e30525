"""From coefficients to subbands, and from subbands to what is measured."""
