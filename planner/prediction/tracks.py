"""What an array gives for a target in one look: from stations to beam and noise."""

from __future__ import annotations
