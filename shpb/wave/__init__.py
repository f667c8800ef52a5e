"""How a pulse travels from a gauge station to a specimen face."""
