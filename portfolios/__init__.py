"""Portfolios: the extract of policies, its columns and checks, and product designs as documents."""
