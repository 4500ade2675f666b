"""What a water is: from conductivity and temperature to salinity, density and osmolality."""
