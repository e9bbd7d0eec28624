#!/bin/sh
# Run once by the image of PostgreSQL, as its superuser, when the database is empty: the two roles and the
# database of the service. The same as under PostgreSQL in the README, with the passwords from files.
set -eu
export SECRETS="${SECRETS:-/run/secrets}"

# psql reads the passwords itself, so that they stand in no list of processes
psql --no-psqlrc --quiet --set=ON_ERROR_STOP=1 \
    --username="${POSTGRES_USER:-postgres}" --dbname=postgres <<'SQL'
\set owner_password `cat "$SECRETS/owner_password"`
\set service_password `cat "$SECRETS/service_password"`
CREATE ROLE gain_owner LOGIN PASSWORD :'owner_password';
CREATE ROLE gain_service LOGIN PASSWORD :'service_password';
CREATE DATABASE gain_signoff OWNER gain_owner;
REVOKE ALL ON DATABASE gain_signoff FROM PUBLIC;
GRANT CONNECT ON DATABASE gain_signoff TO gain_service;
SQL
