"""Mass on the globe: how much of each cell is ocean, where the mass sources lie, and a gigatonne spread over one."""
