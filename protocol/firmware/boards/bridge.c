/* Makes the UART of an emulator, a unix socket, a pseudo-terminal:
 *   bridge SOCKET LINK
 * prints LINK on the first line once the emulator has been reached. */
#define _GNU_SOURCE
#include <fcntl.h>
#include <poll.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/socket.h>
#include <sys/un.h>
#include <termios.h>
#include <unistd.h>

static int dial(const char *path)
{
	struct sockaddr_un a = {.sun_family = AF_UNIX};

	if (strlen(path) >= sizeof a.sun_path)
		return -1;
	strcpy(a.sun_path, path);
	for (int i = 0; i < 500; i++) { /* the emulator may not be up yet: 5 s */
		int fd = socket(AF_UNIX, SOCK_STREAM, 0);

		if (fd < 0)
			return -1;
		if (connect(fd, (struct sockaddr *)&a, sizeof a) == 0)
			return fd;
		close(fd);
		usleep(10000);
	}
	return -1;
}

/* carry moves what there is from one end to the other; 0 at an end. */
static int carry(int from, int to)
{
	char b[4096];
	ssize_t n = read(from, b, sizeof b), done = 0;

	while (n > 0 && done < n) {
		ssize_t w = write(to, b + done, (size_t)(n - done));

		if (w <= 0)
			return 0;
		done += w;
	}
	return n > 0;
}

int main(int argc, char **argv)
{
	int sock, pty, slave;
	struct termios tio;

	if (argc != 3) {
		fprintf(stderr, "usage: bridge SOCKET LINK\n");
		return 2;
	}
	sock = dial(argv[1]);
	pty = posix_openpt(O_RDWR | O_NOCTTY);
	if (sock < 0 || pty < 0 || grantpt(pty) != 0 || unlockpt(pty) != 0 || (slave = open(ptsname(pty), O_RDWR | O_NOCTTY)) < 0) {
		perror("bridge");
		return 1;
	}
	tcgetattr(slave, &tio);
	cfmakeraw(&tio); /* before anybody opens it, or what is sent is echoed */
	tcsetattr(slave, TCSANOW, &tio);
	unlink(argv[2]);
	if (symlink(ptsname(pty), argv[2]) != 0) {
		perror("bridge: link");
		return 1;
	}
	printf("%s\n", argv[2]);
	fflush(stdout);
	for (;;) {
		struct pollfd p[2] = {{.fd = sock, .events = POLLIN}, {.fd = pty, .events = POLLIN}};

		poll(p, 2, -1);
		if (p[0].revents != 0 && !carry(sock, pty))
			break;
		if (p[1].revents != 0 && !carry(pty, sock))
			break;
	}
	unlink(argv[2]);
	return 0;
}
