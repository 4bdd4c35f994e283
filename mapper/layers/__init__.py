"""Layers: opening files, decoding raw values once, and bringing them onto the job's grid."""
