"""Filter and amplifiers together: sized for each other, and judged as one circuit."""
