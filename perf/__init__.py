"""Aeroplane performance in a glide: atmosphere, polar, speeds, turns and the glide table."""
