"""Assumptions: tables and laws of mortality, lapse, interest, expenses; a basis bundles them under a name."""
