"""Tests of mission.machine."""
