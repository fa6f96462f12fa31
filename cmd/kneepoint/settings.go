package main

import (
	"github.com/spf13/cobra"
	"github.com/spf13/viper"
)

// bindSettings gives a command the flags that override the settings.
func bindSettings(c *cobra.Command, v *viper.Viper) {
	c.Flags().Int("workers", 0, "cores to use; 0 is all of them")
	c.Flags().String("retest", "last", "which measurement of a retested die counts: last, first or best")
	c.Flags().Bool("count-edge-dice", true, "count dice in the edge exclusion too")
	for key, flag := range map[string]string{"workers": "workers", "retest": "retest", "count_edge_dice": "count-edge-dice"} {
		_ = v.BindPFlag(key, c.Flags().Lookup(flag)) // fails only for a nil flag
	}
}
