"""What the laboratory decides and what follows from numbers: no clock, disk, environment or network."""
