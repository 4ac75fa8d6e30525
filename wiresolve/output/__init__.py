"""Functions on a result that write files people and ParaView open."""
