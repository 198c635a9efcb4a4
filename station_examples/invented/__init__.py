"""Where the examples come from: invented land, weather, farms and morning air, made by rule and fixed seed."""
