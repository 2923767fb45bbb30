"""The two audits of a vector field on a mesh."""
