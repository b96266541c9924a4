"""Demo projects with their meshes. All data here is invented."""
