//! electro
