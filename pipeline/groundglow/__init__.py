"""Groundglow: calibrated maps of surface temperature and emitted flux from thermal-infrared rasters."""

__version__ = "0.1.0"
