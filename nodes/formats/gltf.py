"""glTF 2.0, read and written without loss (ISO/IEC 12113:2022; Khronos glTF 2.0 specification)."""

from tangentry.nodes.formats.gltf_reading import read_gltf
from tangentry.nodes.formats.gltf_writing import write_gltf

__all__ = ["read_gltf", "write_gltf"]
