"""What the field gave us: reading, findings, alignment, and the frozen `Record`."""
