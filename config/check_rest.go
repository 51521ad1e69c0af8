package config

func (c *checker) section() {}
func (c *checker) gauges()  {}
func (c *checker) loads()   {}
func (c *checker) plan()    {}
func (c *checker) records() {}
func (c *checker) limits()  {}
