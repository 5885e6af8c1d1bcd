# Make stand-ins for the two base images from the distribution's packages, as root file systems in $W: no image registry is needed.
# Run under `unshare -m`: the trees are made on a tmpfs, since most of the time would go into fsync.
mkdir -p "$W/r"
mount -t tmpfs tmpfs "$W/r"
PY=$W/r/py REDIS=$W/r/redis
MIRROR=$(awk '/^URIs:/{print $2; exit}' /etc/apt/sources.list.d/*.sources)
debootstrap --variant=minbase \
  --include=ca-certificates,netbase,tzdata,libssl3,zlib1g,libbz2-1.0,liblzma5,libffi8,libreadline8,libsqlite3-0,libncursesw6,libuuid1,libgdbm6,libgdbm-compat4,libexpat1 \
  bookworm "$PY" "$MIRROR" >"$W/debootstrap.log" 2>&1
rm -rf "$PY"/var/cache/apt/archives/*.deb "$PY"/var/lib/apt/lists/* "$PY"/usr/share/{man,doc,locale}/* "$PY"/var/log/*
cp -a "$PY" "$REDIS"

for deb in "$W"/deb/{redis,lib,lua}*.deb; do dpkg-deb --fsys-tarfile "$deb" | tar -C "$REDIS" --keep-directory-symlink -xf -; done
chroot "$REDIS" sh -ec '
  groupadd -r -g 999 redis; useradd -r -g redis -u 999 -d /data -s /usr/sbin/nologin redis
  mkdir -m 700 /data; chown 999:999 /data; ldconfig; redis-server --version'

# Any tree of this Python that was built on the same release of the distribution.
TREE=${PYTHON_TREE:-$(printf '%s\n' "$(pyenv root)"/versions/3.12.* | tail -1)}
tar -C "$TREE" --exclude='lib/python3.12/test' --exclude='lib/python3.12/config-*' --exclude='lib/python3.12/site-packages/*' \
  --exclude='__pycache__' --exclude='lib/python3.12/idlelib' --exclude='lib/python3.12/tkinter' --exclude='*.a' -cf - bin lib include |
  tar -C "$PY/usr/local" --no-same-owner -xf -
rm -f "$PY"/usr/local/bin/{pip,2to3,idle}*
ln -sf python3.12 "$PY/usr/local/bin/python"
chroot "$PY" sh -ec '
  ldconfig; python -m ensurepip >/dev/null 2>&1; ln -sf pip3 /usr/local/bin/pip
  python -V; python -c "import ssl,sqlite3,lzma,bz2,ctypes,readline,uuid,zlib"'

for base in py redis; do tar -C "$W/r/$base" -cf "$W/$base.tar.part" . && mv "$W/$base.tar.part" "$W/$base.tar"; done
