"""What the benchmark's commands share: building, timing, comparing, reporting."""
