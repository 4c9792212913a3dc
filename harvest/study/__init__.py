"""What asks the model many times: sizing, sweeps, duty profiles, doubt."""
