"""From r(phi) to how often det r goes round."""
