"""One file per screen: widgets and layout; every number comes from an assessment."""
