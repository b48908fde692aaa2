"""File formats: glTF, OBJ, PLY, images."""
