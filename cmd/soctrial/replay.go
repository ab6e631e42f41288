package main

import "github.com/spf13/cobra"

func replayCommand(s streams) *cobra.Command { return &cobra.Command{Use: "replay"} }
func showCommand(s streams) *cobra.Command   { return &cobra.Command{Use: "show"} }
