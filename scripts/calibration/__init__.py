"""The calibration study: exact fields, random control surfaces, what fvcheck says and what is true."""
