"""Tests of mission.device; ``factories`` and ``broken_modules`` are used by later stages too."""
