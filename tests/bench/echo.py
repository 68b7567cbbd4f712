"""A TCP instrument that answers each query with its own text: ``python -m tests.bench.echo``.

In a process of its own, so that it does not share the interpreter with what is measured.
"""

import socket
import sys


def main() -> None:
    """Print the port, then answer one client until it leaves."""
    with socket.create_server(("127.0.0.1", 0)) as listener:
        print(listener.getsockname()[1], flush=True)
        while True:
            client, _ = listener.accept()
            client.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
            with client:
                serve(client)


def serve(client: socket.socket) -> None:
    """Echo every line."""
    partial = b""
    while data := client.recv(4096):
        *lines, partial = (partial + data).split(b"\n")
        for line in lines:
            client.sendall(line + b"\n")


if __name__ == "__main__":
    try:
        main()
    except KeyboardInterrupt:
        sys.exit(0)
