"""Batch: lists of any length in chunks, through worker processes or a cluster, into a file that can be resumed.

    rows -> chunks -> engine (this process, workers, cluster) -> journal and part file -> packing -> output

A chunk's bytes depend on its rows and the plan only, and chunks are written in the order of the input, so the
output is the same whatever computed it and however often the run was stopped.
"""
