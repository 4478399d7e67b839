//! axial
