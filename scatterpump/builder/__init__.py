"""Descriptions of devices and how they become pumps: the only room that adds sites to kwant."""
