package page_test

import "fmt"

// chooseByMouse chooses in a select box by mouse, and waits until it is chosen. The list of
// options is a window of the browser's own, in which no click from the DevTools arrives: a click
// opens it, and keys go to it.
func (p *tab) chooseByMouse(box, option string) {
	p.t.Helper()
	p.click(box)
	p.await("the list is open", box+".matches(':open')")
	p.toOption(box, option)
	p.press("Enter")
	p.await("it is chosen and closed", fmt.Sprintf("%s.value === %q && !%[1]s.matches(':open')", box, option))
}

// chooseByKeys does the same by keyboard, from wherever the focus is, without the list.
func (p *tab) chooseByKeys(box, option string) {
	p.t.Helper()
	p.tabTo(box)
	p.toOption(box, option)
	p.await("it is chosen", fmt.Sprintf("%s.value === %q", box, option))
}

// toOption presses arrows from the option that is chosen to another.
func (p *tab) toOption(box, option string) {
	p.t.Helper()
	p.await("it may be chosen", fmt.Sprintf("[...%s.options].some(o => o.value === %q)", box, option))
	by := eval[int](p, fmt.Sprintf("[...%s.options].findIndex(o => o.value === %q) - %[1]s.selectedIndex", box, option))
	for ; by > 0; by-- {
		p.press("ArrowDown")
	}
	for ; by < 0; by++ {
		p.press("ArrowUp")
	}
}
