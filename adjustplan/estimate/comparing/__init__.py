"""Estimates held against each other: of several sets, in several strata, conditional against marginal."""
