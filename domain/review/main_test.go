package review_test

import (
	"testing"

	"lampward/domain/domaintest"
)

func TestMain(m *testing.M) { domaintest.Main(m) }
