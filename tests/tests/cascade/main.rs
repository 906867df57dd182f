//! Doubling sequences ten deep, and lines of doublings that are not universal.

mod deep; // Roessler's first ten doublings, their ratios and their limit
mod shooting; // the independent computation they are checked against
mod wrong; // predictions that fail: a bubble, a stretched scale
