#!/bin/sh
# Makes every secret of compose.yaml in a new folder, each in a file of its own: sh make-secrets.sh FOLDER
#
# Compose shows these files in the containers as they are, with their owners: 999 is the user postgres of
# PostgreSQL's image, 10001 the user of the service's. Only root can give files to them.
set -eu
folder=${1:?name the folder to be made}
command -v openssl >/dev/null || { echo 'openssl is missing; it makes the signing key.' >&2; exit 1; }
umask 077
mkdir -- "$folder"
# everybody passes through, nobody lists
chmod 711 -- "$folder"
cd -- "$folder"

random() {
    od -An -v -tx1 -N32 /dev/urandom | tr -d ' \n'
}

for name in superuser_password owner_password service_password secret_key; do
    random >"$name"
done
for role in owner service; do
    printf 'postgresql+psycopg://gain_%s:%s@database/gain_signoff' "$role" "$(cat "${role}_password")" \
        >"${role}_database_url"
done
openssl genpkey -algorithm ed25519 -out signing_key.pem
chmod 400 ./*
if [ "$(id -u)" = 0 ]; then
    chown 999:999 ./*_password
    chown 10001:10001 ./*_database_url secret_key signing_key.pem
else
    echo 'Not root: give *_password to user 999 and the other files to user 10001 before docker compose up.' >&2
fi
echo 'Public key of the checkpoints, for whoever checks them:'
# the last 32 bytes of the DER form are the key itself (RFC 8410)
openssl pkey -in signing_key.pem -pubout -outform DER | tail -c 32 | openssl base64
echo 'Keep a copy of secret_key and signing_key.pem elsewhere.'
