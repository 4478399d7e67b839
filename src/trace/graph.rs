//! graph
