"""What a person reads afterwards: pinout, timing diagram, record page, label."""
