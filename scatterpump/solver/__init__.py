"""From a pump to r(phi) and t(phi)."""
