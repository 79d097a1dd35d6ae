"""An instrument that listens to SCPI, written from IEEE 488.2 and SCPI-1999."""
