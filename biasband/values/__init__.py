"""Values: ideal resistors from a target, and buyable ones near them."""
