package plotting

import "linewright/builtins/linecode"

func card(c *linecode.Code) Bundle { return textBundle(c.Name()) }
