#!/bin/sh
# Types every command of `rtid guide install` into a fresh Debian: sudo sh tools/check_install.sh [bookworm|trixie]
#
# The Debian is made with debootstrap in a temporary folder and booted with systemd-nspawn. What it cannot try, a running
# udev, it says. Some minutes.
set -eu
project=$(cd "$(dirname "$0")/.." && pwd)
suite=${1:-bookworm}
packages=systemd,systemd-sysv,udev,dbus,sudo,adduser,ca-certificates,netbase,mosquitto

fail() {
    printf 'check_install: %s\n' "$1" >&2
    exit 69
}

[ "$(id -u)" -eq 0 ] || fail "needs root: sudo sh tools/check_install.sh"
for program in debootstrap systemd-nspawn; do
    command -v $program >/dev/null || fail "$program is missing: apt install debootstrap systemd-container"
done
folder=$(mktemp -d)
root=$folder/root
trap 'rm -rf --one-file-system "$folder"' EXIT

# A user's computer: the project in a home folder, a broker with a password. The certificates are those of this
# computer, whose network may have an authority of its own.
make_root() {
    debootstrap --variant=minbase --include="$packages" "$suite" "$root" >"$folder/debootstrap.log" 2>&1 ||
        fail "debootstrap failed: $(tail -n 1 "$folder/debootstrap.log")"
    cp /etc/ssl/certs/ca-certificates.crt "$root/etc/ssl/certs/"
    cp --remove-destination -L /etc/resolv.conf "$root/etc/resolv.conf"
    printf '127.0.0.1 localhost %s\n' "$(hostname)" >"$root/etc/hosts"
    chroot "$root" useradd --create-home --shell /bin/sh person
    printf 'person ALL=(ALL) NOPASSWD: ALL\nDefaults env_keep += "EDITOR"\n' >"$root/etc/sudoers.d/person"
    mkdir "$root/home/person/rtid"
    tar -C "$project" --exclude=.git --exclude=.venv --exclude=__pycache__ -cf - . | tar -C "$root/home/person/rtid" -xf -
    chroot "$root" chown -R person: /home/person/rtid
    printf 'listener 1883 127.0.0.1\npassword_file /etc/mosquitto/passwords\n' >"$root/etc/mosquitto/conf.d/local.conf"
    chroot "$root" sh -c 'mosquitto_passwd -b -c /etc/mosquitto/passwords rtid "a secret"
        chown mosquitto: /etc/mosquitto/passwords' 2>/dev/null
}

# The commands are the indented lines of the page; NAME is who sits there.
steps() {
    sed -n 's/^    //p' "$project/rtid/guide/install.md" | sed 's/\bNAME\b/person/'
}

# A plant on a port of group dialout, started when the configuration is first written.
write_plant() {
    cat >"$root/usr/local/bin/start-plant" <<'END'
#!/bin/sh
[ -e /run/plant ] && exit
setsid /opt/rtid/bin/python /home/person/rtid/tools/plant_port.py --link /run/plant >/run/plant.yaml 2>/run/plant.log &
until [ -s /run/plant.yaml ] && [ -e /run/plant ]; do sleep 0.1; done
chgrp dialout "$(readlink /run/plant)"
chmod 660 "$(readlink /run/plant)"
END
}

# Writes in the person's place: the plant on its port, the broker of this computer, the password.
write_editor() {
    cat >"$root/usr/local/bin/scripted-editor" <<'END'
#!/bin/sh
broker='broker: {host: localhost, username: rtid, password_file: broker.secret}'
case $1 in
    *node*) sudo start-plant && sed "s/^state_dir:.*/$broker/" /run/plant.yaml >"$1" ;;
    *secret*) echo 'a secret' >"$1" ;;
esac
END
    chmod 755 "$root"/usr/local/bin/*
}

# Runs in the new Debian: each step as that person, its result in one line, and what must then be true.
write_runner() {
    cat >"$root/check.sh" <<'END'
cd /home/person/rtid
type_in() { setpriv --reuid person --regid person --init-groups env HOME=/home/person EDITOR=scripted-editor sh -c "$1" >/said 2>&1; }
broken() {
    printf 'FAILED    %s\n' "$1"
    { cat /said; journalctl -n 20 --no-pager; } | sed 's/^/          /'
    exit 1
}
# says STEP WORDS: within ten seconds
says() {
    for _ in 1 2 3 4 5 6 7 8 9 10; do
        type_in "$1"
        grep -q "$2" /said && return
        sleep 1
    done
    broken "$1: does not say '$2'"
}
while IFS= read -r step <&3; do
    case $step in *udevadm*) printf 'skipped   %s\n' "$step"; continue ;; esac
    type_in "$step" || broken "$step"
    case $step in
        "systemctl status rtid "*) says "$step" 'Status: "learning: conveyor"' ;;
        *"journalctl -u rtid -n 20 "*) says "$step" 'is open'; says "$step" 'connected to the broker' ;;
        *"journalctl -u rtid -n 5 "*) says "$step" 'the configuration is taken over' ;;
        *"journalctl -u rtid@"*) says "$step" 'connected to the broker' ;;
        *"reload rtid" | *"restart rtid") sleep 3; type_in 'systemctl is-active rtid' || broken "$step: the service is gone" ;;
    esac
    printf 'ok        %s\n' "$step"
done 3</steps
rm -f /usr/local/bin/scripted-editor
left=$(find /etc /opt /run /usr/local /var/lib -xdev -name '*rtid*')
[ -z "$left" ] || { printf 'FAILED    these are left after removal: %s\n' "$left"; exit 1; }
echo 'ok        nothing is left'
END
}

# Boots the Debian with a unit that runs the steps and powers off.
boot() {
    cat >"$root/etc/systemd/system/check.service" <<'END'
[Unit]
After=multi-user.target
[Service]
Type=oneshot
Environment=SYSTEMD_COLORS=0
StandardOutput=file:/result
StandardError=inherit
ExecStart=/bin/sh /check.sh
ExecStopPost=/bin/systemctl --no-block poweroff
[Install]
WantedBy=graphical.target
END
    chroot "$root" systemctl enable --quiet check.service 2>/dev/null
    # One hierarchy of control groups, and leave to use it: so the unit's rules for devices are in force.
    SYSTEMD_NSPAWN_UNIFIED_HIERARCHY=1 timeout 900 systemd-nspawn --directory="$root" --boot --quiet --register=no --keep-unit \
        --machine="check-install-$$" --capability=all --system-call-filter=bpf </dev/null >"$folder/boot.log" 2>&1 || true
    [ -s "$root/result" ] || fail "the new Debian did not boot: $(tail -n 1 "$folder/boot.log")"
}

make_root
steps >"$root/steps"
write_plant
write_editor
write_runner
boot
cat "$root/result"
[ "$(tail -n 1 "$root/result")" = 'ok        nothing is left' ]
