"""Results as text: tables for the screen, CSV and JSON for scripts."""
