//! From a field to a closed two-manifold mesh, simplified and audited.
