package retrofit

// dimmerRules judge dimmers against what hangs on them.
var dimmerRules = []Rule{}
