//! Derivatives and derived quantities against exact flows, defining sums and closed forms.

mod lines;
