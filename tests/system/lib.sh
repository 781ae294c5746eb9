# Sourced by system tests that need a service of their own: a scratch directory, parties with quick key files, the clock.
#   . "$(dirname "$0")/lib.sh"; scratch 241; start_service; enrol custodian ines; as ines party list
top=$(cd "$(dirname "${BASH_SOURCE[0]}")/../.." && pwd)
build=$(cd "${QB_BUILD:-$top/build}" && pwd)
n=0
bad=0
children=""
# ok STATUS TEXT: one line a check; on failure with what the last command printed
ok() { n=$((n + 1)); if [ "$1" -eq 0 ]; then echo "ok $n $2"; else echo "not ok $n $2"; sed 's/^/    /' "$work/out"; bad=1; fi; }
# fails STATUS TEXT COMMAND...: the command ends with this status and prints one line that holds TEXT
fails() {
	wanted=$1 text=$2; shift 2
	"$@"; got=$?
	[ $got -eq "$wanted" ] && grep -q -- "$text" "$work/out" && [ "$(wc -l <"$work/out")" -eq 1 ]
}
finish() {
	# a driver that is told to end in the middle of a slot stays to report it, on a clock that moves no more
	for p in $children; do kill "$p" 2>/dev/null; done
	for _ in $(seq 30); do
		left=0
		for p in $children; do kill -0 "$p" 2>/dev/null && left=1; done
		[ $left -eq 0 ] && break
		sleep 0.1
	done
	for p in $children; do kill -9 "$p" 2>/dev/null; done
	wait 2>/dev/null
	if [ $bad -ne 0 ] && [ -n "${QB_KEEP:-}" ]; then echo "kept: $work"; else rm -rf "$work"; fi
}
scratch() {
	work=$(mktemp -d "/tmp/qb-$1-XXXXXX")
	trap finish EXIT
	mkdir -p "$work/home"
	(umask 077; echo "rehearsal only" >"$work/passphrase")
	export QUIETBELL_PASSPHRASE_FILE=$work/passphrase NO_COLOR=1
}
# as NAME VERB...: the client as that party; output in $work/out
as() { who=$1; shift; timeout 120 "$build/quietbell" "$@" --home "$work/home/$who" ${url:+--service "$url"} >"$work/out" 2>&1 </dev/null; }
# start_service [CLOCK]: makes (once) and starts a service on loopback
start_service() {
	if [ ! -d "$work/service" ]; then
		as admin key new --name admin --rehearsal-seed 7 || return 1
		"$build/quietbelld" init --data "$work/service" --admin "$work/home/admin/key.pub" --clock "${1:-rehearsal}" >"$work/out" 2>&1 || return 1
		printf 'data: %s\nlisten: 127.0.0.1:0\nclock: %s\n' "$work/service" "${1:-rehearsal}" >"$work/q.yaml"
	fi
	rm -f "$work/service/port"
	"$build/quietbelld" --config "$work/q.yaml" >>"$work/service.log" 2>&1 </dev/null &
	service_pid=$!
	children="$children $service_pid"
	for _ in $(seq 200); do [ -s "$work/service/port" ] && break; sleep 0.05; done
	url=http://127.0.0.1:$(cat "$work/service/port")
}
stop_service() { kill "$service_pid"; wait "$service_pid" 2>/dev/null; }
# enrol ROLE NAME [OPTIONS of key new]
enrol() {
	role=$1 name=$2; shift 2
	as "$name" key new --name "$name" --rehearsal "$@" || return 1
	as admin party invite "$role" "$name" --json || return 1
	code=$(sed -n 's/.*"code": "\([^"]*\)".*/\1/p' "$work/out")
	as "$name" party enrol "$code"
}
# The people of deploy/demo/short-plan.yaml.
enrol_everybody() {
	for p in ines okoro marchetti; do enrol custodian $p || return 1; done
	for p in lund petrov; do enrol operator $p || return 1; done
	for p in noor diego wei; do enrol analyst $p || return 1; done
	for p in hosta hostb hostc; do enrol driver $p || return 1; done
	enrol reviewer asha && enrol liaison mbeki
}
clock_to() { as admin service clock --to "$1"; }
# until_true SECONDS COMMAND...
until_true() {
	tries=$(($1 * 10)); shift
	while ! "$@"; do
		tries=$((tries - 1))
		[ $tries -gt 0 ] || return 1
		sleep 0.1
	done
}
state_is() { as admin campaign show "$1" --json && grep -q "\"state\": \"$2\"" "$work/out"; }
# start_driver CAMPAIGN HOST STATION [FOLDER-OF-SINK]
start_driver() {
	mkdir -p "$work/drive/${4:-$3}"
	"$build/quietbell-driver" "$1" --station "$3" --sink "file:$work/drive/${4:-$3}" --home "$work/home/$2" --service "$url" \
		>>"$work/driver-${4:-$3}.log" 2>&1 </dev/null &
	children="$children $!"
}
# seal_short: drafts deploy/demo/short-plan.yaml and brings it to `sealed`, with three drivers running; $spare: a host that
# stands in for tarn's
seal_short() {
	cp "$top"/deploy/demo/short-*.yaml "$work/"
	[ -z "${spare:-}" ] || sed -i "s/^  drivers: .*/&\n  spare_drivers: {tarn: $spare}/" "$work/short-plan.yaml"
	clock_to 2027-02-28T23:50:00Z || return 1
	as admin campaign draft "$work/short-plan.yaml" || return 1
	joins=""
	for p in ines okoro marchetti; do
		timeout 120 "$build/quietbell" campaign keygen fells-short --wait --home "$work/home/$p" --service "$url" \
			>>"$work/keygen-$p.log" 2>&1 </dev/null &
		joins="$joins $!"
	done
	start_driver fells-short hosta tarn
	start_driver fells-short hostb heron
	start_driver fells-short hostc skerry
	[ -z "${spare:-}" ] || start_driver fells-short "$spare" tarn tarn-spare
	until_true 60 state_is fells-short rehearsed || return 1
	until_true 60 as admin campaign seal fells-short || return 1
	for p in $joins; do wait "$p" || return 1; done
}
# open_and_export CAMPAIGN FILE: closes, opens with the first two custodians, has the head cosigned, fetches the bundle
open_and_export() {
	as asha campaign close "$1" --reason "the end" || return 1
	as asha opening request "$1" --all --reason review || return 1
	opening=$(head -1 "$work/out")
	for p in ines okoro; do as $p opening join "$1" "$opening" --yes || return 1; done
	for p in ines okoro marchetti; do as $p ledger head || return 1; done
	as asha bundle export "$1" "$2"
}
