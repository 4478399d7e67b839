//! first_passage
