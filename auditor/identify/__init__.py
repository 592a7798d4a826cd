"""From a Record to the loop that made it: the controller, and an ensemble of likely plants."""
