package main

import (
	"offplane/compare/report"
	"offplane/scenarios"
)

func setup(s *scenarios.Scenario) report.Setup { return report.Setup{About: s.About} }
