"""Motif families: which small wirings can show a behaviour, and what they have in common."""
