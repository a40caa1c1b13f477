"""Elastic kernels: displacement of the ground by sources underground (SI in, SI out).

Depth and subsidence are positive down; horizontal displacement is positive away from the axis of
a source (point kernels) or along the axes given (finite bodies).
"""
