//! The stages in order: read, correct, trace, measure, forecast, write.
