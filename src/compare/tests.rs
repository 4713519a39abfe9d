//! Comparisons of invented results and values.
