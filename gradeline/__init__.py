"""From manometer and gauge readings along a pipe to head loss, friction factor and wall roughness."""
