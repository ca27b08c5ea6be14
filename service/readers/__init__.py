"""What comes in: bytes turned into fixes, zones and attributes, every fault named."""
