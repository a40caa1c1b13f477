"""Figures of a result. Nothing is imported here, so that the package stays light."""
