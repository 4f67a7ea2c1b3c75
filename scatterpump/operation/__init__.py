"""What a laboratory asks: the charge with all its errors, temperature, speed and current."""
