"""Checks: found figures beside independent direct measurements."""
