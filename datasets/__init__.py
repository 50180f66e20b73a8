"""Rigs that come with Finback: published profiles and an invented rig with known truth."""
