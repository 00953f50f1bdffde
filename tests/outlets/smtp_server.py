"""A real mail server for the tests: aiosmtpd with STARTTLS, encryption from the start, and passwords.

Arguments: the folder with broker.pem and broker.key, the port, and a mode: `starttls`, `tls` or
`clear`. Each message is written into the folder as mail-N.eml, with its envelope in front. The file
`refuse` in the folder makes it refuse every message with the file's text.
"""

import asyncio
import pathlib
import ssl
import sys

from aiosmtpd.smtp import SMTP, AuthResult

folder, port, mode = pathlib.Path(sys.argv[1]), int(sys.argv[2]), sys.argv[3]


class Keep:
    count = 0

    async def handle_DATA(self, server, session, envelope):
        refuse = folder / "refuse"
        if refuse.exists():
            return refuse.read_text().strip()
        Keep.count += 1
        to = ",".join(envelope.rcpt_tos)
        kind = "encrypted" if session.ssl or mode == "tls" else "clear"
        user = session.auth_data or "nobody"
        head = f"{kind} {user} {envelope.mail_from} {to}\n".encode()
        name = folder / f"mail-{Keep.count}.part"
        name.write_bytes(head + envelope.original_content)
        name.rename(name.with_suffix(".eml"))
        return "250 kept"


def check(server, session, envelope, mechanism, data):
    good = data.login == b"evenrow" and data.password == "open water ü".encode()
    if good:
        return AuthResult(success=True, auth_data="evenrow")
    return AuthResult(success=False, handled=False)


def server():
    common = {"hostname": "localhost", "enable_SMTPUTF8": True}
    if mode == "clear":
        return SMTP(Keep(), **common)
    common |= {"authenticator": check, "auth_required": True}
    if mode == "tls":
        return SMTP(Keep(), auth_require_tls=False, **common)
    return SMTP(Keep(), tls_context=context(), require_starttls=True, **common)


def context():
    made = ssl.SSLContext(ssl.PROTOCOL_TLS_SERVER)
    made.load_cert_chain(folder / "broker.pem", folder / "broker.key")
    return made


async def main():
    loop = asyncio.get_running_loop()
    tls = context() if mode == "tls" else None
    listening = await loop.create_server(server, "127.0.0.1", port, ssl=tls)
    print("ready", flush=True)
    await listening.serve_forever()


asyncio.run(main())
