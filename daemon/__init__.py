"""Clocks, disks and network: the way of a file from its folder to a flag."""
