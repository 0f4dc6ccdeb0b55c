"""Simulated holograms with known truth: waves in closed form, a camera, named scenes."""
