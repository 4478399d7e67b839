//! thinning
