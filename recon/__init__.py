"""Reconstruction of undersampled k-space, comparison with a reference, studies and reports."""
