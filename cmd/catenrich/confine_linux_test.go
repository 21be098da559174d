package main

import (
	"fmt"
	"net"
	"os"
	"runtime"
	"strconv"
	"strings"
	"unsafe"

	"golang.org/x/sys/unix"
)

// What a test asks of the program that it starts, by environment variables.
const (
	withoutLocks   = "CATENRICH_TEST_WITHOUT_LOCKS"   // flock(2) fails as on a filesystem that has none
	withoutSockets = "CATENRICH_TEST_WITHOUT_SOCKETS" // whoever makes a socket is killed
	fewFiles       = "CATENRICH_TEST_FEW_FILES"       // the limit of open files
	tellPeak       = "CATENRICH_TEST_TELL_PEAK"       // where to write the peak of resident memory, in KiB
)

// dials, as the value of withoutSockets, lets the program try a connection.
const dials = "dials"

// asked runs the program as the environment asks, and does not return.
func asked() {
	err := error(nil)
	if n, convErr := strconv.ParseUint(os.Getenv(fewFiles), 10, 64); convErr == nil {
		err = unix.Setrlimit(unix.RLIMIT_NOFILE, &unix.Rlimit{Cur: n, Max: n})
	}
	if err == nil && os.Getenv(withoutLocks) != "" {
		err = filter(unix.SECCOMP_RET_ERRNO|uint32(unix.ENOLCK), unix.SYS_FLOCK)
	}
	if err == nil && os.Getenv(withoutSockets) != "" {
		err = filter(unix.SECCOMP_RET_KILL_PROCESS, unix.SYS_SOCKET, unix.SYS_SOCKETPAIR)
	}
	if err != nil {
		fmt.Fprintln(os.Stderr, "cannot confine:", err)
		os.Exit(99)
	}
	if os.Getenv(withoutSockets) == dials {
		net.Dial("tcp", "127.0.0.1:1")
	}
	if path := os.Getenv(tellPeak); path != "" {
		code := run(os.Args[1:], os.Stdin, os.Stdout, os.Stderr)
		if err := os.WriteFile(path, []byte(peak()), 0o666); err != nil {
			fmt.Fprintln(os.Stderr, err)
			os.Exit(99)
		}
		os.Exit(code)
	}
	main()
}

// peak is the most memory that was resident, in KiB. The usage that a parent
// is told of begins with the parent's own.
func peak() string {
	status, _ := os.ReadFile("/proc/self/status")
	_, after, _ := strings.Cut(string(status), "VmHWM:")
	return strings.Fields(after + " 0")[0]
}

// filter makes the kernel answer some system calls of all threads (seccomp(2)).
func filter(answer uint32, calls ...uint32) error {
	const number = 0 // offset in struct seccomp_data
	program := []unix.SockFilter{{Code: unix.BPF_LD | unix.BPF_W | unix.BPF_ABS, K: number}}
	for _, call := range calls {
		program = append(program,
			unix.SockFilter{Code: unix.BPF_JMP | unix.BPF_JEQ | unix.BPF_K, Jf: 1, K: call},
			unix.SockFilter{Code: unix.BPF_RET | unix.BPF_K, K: answer})
	}
	program = append(program, unix.SockFilter{Code: unix.BPF_RET | unix.BPF_K, K: unix.SECCOMP_RET_ALLOW})
	if err := unix.Prctl(unix.PR_SET_NO_NEW_PRIVS, 1, 0, 0, 0); err != nil {
		return err
	}
	f := unix.SockFprog{Len: uint16(len(program)), Filter: &program[0]}
	_, _, errno := unix.Syscall(unix.SYS_SECCOMP, unix.SECCOMP_SET_MODE_FILTER, unix.SECCOMP_FILTER_FLAG_TSYNC, uintptr(unsafe.Pointer(&f)))
	runtime.KeepAlive(program)
	if errno != 0 {
		return errno
	}
	return nil
}
