// Package tap reads the terminal ahead of the screens. A goroutine of its own
// reads every byte, calls a hook for a stop before anything else, and only then
// passes the key on to Bubble Tea. A terminal that no longer reads, a frame that
// takes too long or a screen with a fault can then delay everything but a stop.
//
//	keyboard ─► Tap.Run ─► OnStop, OnKey, OnPaste   (in the reading goroutine)
//	                └────► Tap.Read ─► Bubble Tea   (bounded, may be late or lost)
//
// It knows keys as bytes, not what they do; which key may be pressed when is
// decided behind the hooks.
//
// # What Bubble Tea v1.3.10 does with an input that is not a file
//
// Read in its source, for whoever wires the parts:
//
//   - tea.WithInput(tap): the input is not a term.File, so the program does not
//     set raw mode (tty_unix.go, tty_windows.go: initInput) and cannot give it
//     back. MakeRaw and Terminal.Restore do both.
//   - The reader is wrapped in cancelreader's fallback, whose Cancel does not
//     free a Read that waits and returns false; the shutdown then does not wait
//     for it (tea.go: shutdown). Tap.Close frees it. A second reader started by
//     tea.Exec, tea.Suspend or RestoreTerminal would share the Tap with the
//     first: do not use them.
//   - One Read becomes one or more messages, and printable bytes of one Read
//     become a single message, so that `ss` is never `s` (key.go:
//     readAnsiInputs). Tap.Read therefore gives one key a call.
//   - A bracketed paste without its end is collected for ever and swallows every
//     key after it (key.go: detectBracketedPaste). The Tap closes each piece.
//   - Size: the program asks the *output* for it, at the start and on SIGWINCH,
//     if the output is an *os.File on a terminal; that keeps working. On Windows
//     it only hears of a new size through an *os.File input, so not with a Tap;
//     there, and with an output that is no file, use WatchSize.
//   - Signals: the program turns SIGINT and SIGTERM into messages unless
//     tea.WithoutSignalHandler is given, does not know SIGHUP, and needs its
//     event loop for either: handle all three outside of it.
//   - A panic in a goroutine of ours is not caught by it and leaves the terminal
//     raw: Restore in the panic hook.
//
// On Windows, MakeRaw asks the console for terminal sequences; a console that
// cannot send them is too old for this program. Go's console reader reports
// Ctrl-Z as the end of the input; a Tap takes it for the key it is.
package tap
