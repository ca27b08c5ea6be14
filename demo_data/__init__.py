"""An invented scenario: moor ponies and tide cranes on an archipelago across the antimeridian."""
