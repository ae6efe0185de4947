package report

import (
	"fmt"
	"strconv"
	"strings"

	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/sequence"
)

const exitDegraded = product.ExitDegraded

func exitSentence(in Input) string {
	switch in.Run.Exit {
	case 0:
		return "Exit code 0: nothing is missing."
	case exitDegraded:
		return "Exit code 3: the product was written, but it is not whole."
	}
	return fmt.Sprintf("Exit code %d.", in.Run.Exit)
}

// sentence gives a clause a capital and a full stop.
func sentence(s string) string {
	s = strings.TrimSpace(s)
	if s == "" {
		return s
	}
	first := []rune(s)[:1]
	s = strings.ToUpper(string(first)) + s[len(string(first)):]
	if !strings.ContainsAny(s[len(s)-1:], ".!?") {
		s += "."
	}
	return s
}

func framesSentence(l product.Ledger) string {
	var lacking []int
	all := 0
	for _, e := range l {
		if e.Step > 0 && e.Kind == string(sequence.Science) {
			all++
			if !e.Verdict.Used() {
				lacking = append(lacking, e.Step)
			}
		}
	}
	if len(lacking) == 0 {
		return fmt.Sprintf("All %d science steps have their frame.", all)
	}
	return fmt.Sprintf("%d of %d science steps have their frame; %s.", all-len(lacking), all, stepList(lacking))
}

// stepList names steps, ranges joined: "lacking are the steps 3, 7 to 9".
func stepList(steps []int) string {
	const most = 12 // ranges; the table has them all
	var parts []string
	for i := 0; i < len(steps); {
		k := i
		for k+1 < len(steps) && steps[k+1] == steps[k]+1 {
			k++
		}
		part := strconv.Itoa(steps[i])
		if k > i {
			part += " to " + strconv.Itoa(steps[k])
		}
		parts = append(parts, part)
		i = k + 1
	}
	if len(parts) > most {
		parts = append(parts[:most], "and more")
	}
	if len(steps) == 1 {
		return "lacking is step " + parts[0]
	}
	return "lacking are the steps " + strings.Join(parts, ", ")
}
