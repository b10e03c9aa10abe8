package main

import (
	"fmt"
	"strings"

	"github.com/spf13/cobra"

	"pathtally/properties"
	"pathtally/properties/syntax"
)

const completionHelp = `pathtally completion SHELL      what a shell needs to complete commands and flags

  bash         source <(pathtally completion bash)
  zsh          pathtally completion zsh > "${fpath[1]}/_pathtally"
  fish         pathtally completion fish > ~/.config/fish/completions/pathtally.fish
  powershell   pathtally completion powershell | Out-String | Invoke-Expression
`

var shells = []string{"bash", "zsh", "fish", "powershell"}

func completionCommand(s streams) *cobra.Command {
	c := &cobra.Command{
		Use:       "completion SHELL",
		ValidArgs: shells,
		RunE: func(c *cobra.Command, args []string) error {
			shell := strings.Join(args, " ")
			root := c.Root()
			switch shell {
			case "bash":
				return root.GenBashCompletionV2(s.out, false)
			case "zsh":
				return root.GenZshCompletionNoDesc(s.out)
			case "fish":
				return root.GenFishCompletion(s.out, false)
			case "powershell":
				return root.GenPowerShellCompletion(s.out)
			}
			return fmt.Errorf("completion %s: which shell? There are %s", shell, syntax.Enumerate(shells, "and"))
		},
	}
	setHelp(c, completionHelp)
	return c
}

// completes lets a shell offer the values of a flag.
func completes(c *cobra.Command, flag string, values func() []string) {
	err := c.RegisterFlagCompletionFunc(flag, func(*cobra.Command, []string, string) ([]string, cobra.ShellCompDirective) {
		return values(), cobra.ShellCompDirectiveNoFileComp
	})
	if err != nil {
		panic(err) // no such flag: a mistake in this package
	}
}

// builtInNames are the names that --only can be completed with.
func builtInNames() []string {
	files, err := readRules(".", nil, nil)
	if err != nil {
		return nil
	}
	var names []string
	for _, r := range properties.ListRules(files) {
		names = append(names, r.Name)
		for _, c := range r.Claims {
			names = append(names, r.Name+"/"+c)
		}
	}
	return names
}
