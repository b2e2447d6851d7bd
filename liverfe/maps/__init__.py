"""Fit -> `DecayMaps`: each voxel judged."""

from liverfe.maps.decay_maps import DecayMaps, VoxelStatus

__all__ = ["DecayMaps", "VoxelStatus"]
