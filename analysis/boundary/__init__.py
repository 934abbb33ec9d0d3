"""Where a held state ends (falling) and begins (rising), from levels and taps."""
