//! Forecast of the short circuit.
