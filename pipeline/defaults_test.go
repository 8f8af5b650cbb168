package pipeline

import (
	"reflect"
	"testing"

	"duskline/redshift"
)

// The defaults that package redshift documents are those of
// configs/default.toml.
func TestRedshiftDefaults(t *testing.T) {
	set := DefaultSettings()
	if got, want := set.finderOptions(), redshift.DefaultOptions(); !reflect.DeepEqual(got, want) {
		t.Errorf("default.toml gives the options %+v, package redshift %+v", got, want)
	}
	if got, want := set.thresholds(), redshift.DefaultThresholds(); !reflect.DeepEqual(got, want) {
		t.Errorf("default.toml gives the thresholds %+v, package redshift %+v", got, want)
	}
}
