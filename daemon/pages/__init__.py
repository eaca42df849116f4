"""What people and programs see: pure renderers from outcomes to bytes. No clock, no disk, no system text."""
