"""The safety proof: judges encoded bytes by itself; shares no code with the compiler."""
