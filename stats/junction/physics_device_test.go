package junction

func checkCorners(c *tally, tab *physicsTable)    {}
func checkJacobian(c *tally, tab *physicsTable)   {}
func checkSignatures(c *tally, tab *physicsTable) {}
func checkTrade(c *tally, tab *physicsTable)      {}
