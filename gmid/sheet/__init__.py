"""Sheets and figures: what a design review reads, on paper and on a screen."""
