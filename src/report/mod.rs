//! Tables, figures, overlay and page. Computes nothing.
