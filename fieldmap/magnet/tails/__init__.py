"""What lies beyond the limits of the integral."""
