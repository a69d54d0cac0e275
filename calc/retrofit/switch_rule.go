package retrofit

// switchRules judge switches and contacts against what they switch.
var switchRules = []Rule{}
