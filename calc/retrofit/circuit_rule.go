package retrofit

// circuitRules judge final circuits against all they feed.
var circuitRules = []Rule{}
