"""The control surface: points, faces, groups, and the checks and readers that make one."""
