"""The two audits of a vector field on a mesh."""

from dec.audit.meshes.circulation import audit_circulation
from dec.audit.meshes.flux import audit_flux

__all__ = ["audit_circulation", "audit_flux"]
