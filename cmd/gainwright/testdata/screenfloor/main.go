// Command screenfloor draws a screen of plain text that changes everywhere,
// thirty times a second, by Bubble Tea, reads the port in its argument and throws
// away what comes, and does nothing else. With the argument hello it draws one
// word once.
package main

import (
	"os"
	"strings"
	"time"

	tea "github.com/charmbracelet/bubbletea"
	"go.bug.st/serial"
)

type screen struct {
	hello      bool
	frame      int
	cols, rows int
}

type again time.Time

func next() tea.Cmd {
	return tea.Tick(time.Second/30, func(t time.Time) tea.Msg { return again(t) })
}

func (s screen) Init() tea.Cmd {
	if s.hello {
		return nil
	}
	return next()
}

func (s screen) Update(m tea.Msg) (tea.Model, tea.Cmd) {
	switch m := m.(type) {
	case tea.WindowSizeMsg:
		s.cols, s.rows = m.Width, m.Height
	case again:
		s.frame++
		return s, next()
	}
	return s, nil
}

func (s screen) View() string {
	if s.hello {
		return "hello"
	}
	line := strings.Repeat(string(rune('0'+s.frame%10)), s.cols)
	return strings.TrimSuffix(strings.Repeat(line+"\n", s.rows), "\n")
}

func main() {
	s := screen{hello: os.Args[1] == "hello"}
	if !s.hello {
		port, err := serial.Open(os.Args[1], &serial.Mode{BaudRate: 115200})
		if err != nil {
			panic(err)
		}
		go func() {
			for b := make([]byte, 4096); ; {
				if _, err := port.Read(b); err != nil {
					return
				}
			}
		}()
	}
	if _, err := tea.NewProgram(s, tea.WithAltScreen()).Run(); err != nil {
		os.Exit(1)
	}
}
