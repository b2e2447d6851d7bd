"""Fit -> `DecayMaps`: each voxel judged, and painted with what it was judged to be."""

from liverfe.maps.decay_maps import DecayMaps, VoxelStatus
from liverfe.maps.judge import judge, repaint

__all__ = ["DecayMaps", "VoxelStatus", "judge", "repaint"]
