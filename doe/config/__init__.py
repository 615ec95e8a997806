"""TOML text to a frozen, validated job in SI units; nobody downstream sees text or a unit."""
