"""Campaigns: read and check a configuration, expand it to cases, lay out jobs."""

from scatterloom.campaign.loader import Campaign, load

__all__ = ["Campaign", "load"]
