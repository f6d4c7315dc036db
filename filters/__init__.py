"""Models of motion and measurement, the update, and every filtering strategy."""
