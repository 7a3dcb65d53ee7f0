"""Procedures, specifications, packs and benches that ship with packmime (data)."""
