"""The calibration file: certificates, tables and the uncertainty budget, read into a Chain."""
