//! fixture
