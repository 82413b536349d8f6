"""From a photograph to spots that a person has checked."""
