"""Hologram time-lapses in napari: sessions, layers and docks."""
