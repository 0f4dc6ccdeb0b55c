"""From fringes to complex fields: carrier, demodulation, compensation, refocusing, noise."""
