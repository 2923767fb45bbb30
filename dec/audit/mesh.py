"""The two audits of a vector field on a mesh."""

from dec.audit.mesh_circulation import audit_circulation
from dec.audit.mesh_flux import audit_flux

__all__ = ["audit_circulation", "audit_flux"]
