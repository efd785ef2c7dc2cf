"""Geometry of particles: solids, meshes, voxel images and their cells on a cubic lattice."""
