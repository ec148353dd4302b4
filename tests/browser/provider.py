"""A provider of sign-ins for tests: it asks nothing and signs in whoever its address names."""

from __future__ import annotations

import json
import threading
import time
from http.server import BaseHTTPRequestHandler, ThreadingHTTPServer
from urllib.parse import parse_qs, urlencode, urlsplit

from joserfc import jwt
from joserfc.jwk import RSAKey

__all__ = ["Provider"]


class Provider:
    """OpenID Connect as small as it gets, on a port of its own; `person` is the one that it signs in."""

    def __init__(self) -> None:
        self.person = {"sub": "1", "name": "Ada", "email": "ada@example.org"}
        self.key = RSAKey.generate_key(2048, parameters={"kid": "k"})
        self.nonces: dict[str, str] = {}
        provider = self

        class Handler(BaseHTTPRequestHandler):
            def do_GET(self) -> None:
                asked = urlsplit(self.path)
                if asked.path == "/.well-known/openid-configuration":
                    self.tell(provider.configuration())
                elif asked.path == "/keys":
                    self.tell({"keys": [provider.key.as_dict(private=False)]})
                elif asked.path == "/authorize":
                    query = {name: values[0] for name, values in parse_qs(asked.query).items()}
                    code = f"code{len(provider.nonces)}"
                    provider.nonces[code] = query.get("nonce", "")
                    self.send_response(302)
                    back = {"code": code, "state": query["state"]}
                    self.send_header("Location", f"{query['redirect_uri']}?{urlencode(back)}")
                    self.end_headers()
                else:
                    self.send_error(404)

            def do_POST(self) -> None:
                form = parse_qs(self.rfile.read(int(self.headers["Content-Length"])).decode())
                self.tell(provider.token(form["code"][0]))

            def tell(self, content: object) -> None:
                body = json.dumps(content).encode()
                self.send_response(200)
                self.send_header("Content-Type", "application/json")
                self.send_header("Content-Length", str(len(body)))
                self.end_headers()
                self.wfile.write(body)

            def log_message(self, format: str, *args: object) -> None:
                pass

        self.server = ThreadingHTTPServer(("127.0.0.1", 0), Handler)
        self.url = f"http://127.0.0.1:{self.server.server_port}"
        threading.Thread(target=self.server.serve_forever, daemon=True).start()

    def configuration(self) -> dict[str, object]:
        return {
            "issuer": self.url,
            "authorization_endpoint": f"{self.url}/authorize",
            "token_endpoint": f"{self.url}/token",
            "jwks_uri": f"{self.url}/keys",
            "response_types_supported": ["code"],
            "subject_types_supported": ["public"],
            "id_token_signing_alg_values_supported": ["RS256"],
        }

    def token(self, code: str) -> dict[str, object]:
        now = int(time.time())
        claims = {
            "iss": self.url,
            "aud": "ngm",
            "iat": now,
            "exp": now + 600,
            "nonce": self.nonces[code],
            **self.person,
        }
        signed = jwt.encode({"alg": "RS256", "kid": "k"}, claims, self.key)
        return {"access_token": "a", "token_type": "Bearer", "expires_in": 600, "id_token": signed}

    def secrets(self, app: str) -> str:
        """Return the file of secrets that sets the app up for this provider."""
        return f"""\
[auth]
redirect_uri = "{app}/oauth2callback"
cookie_secret = "only for tests: nothing is kept safe by this"
client_id = "ngm"
client_secret = "x"
server_metadata_url = "{self.url}/.well-known/openid-configuration"
"""

    def stop(self) -> None:
        self.server.shutdown()
