"""The simulated jar line and the embedded broker that ``driftbell demo`` runs on."""
