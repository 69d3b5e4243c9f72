"""What acts on the air, and what is known before the run: profiles, sun, sky, surface, weather, scenario."""
