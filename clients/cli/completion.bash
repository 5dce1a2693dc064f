# SPDX-License-Identifier: GPL-3.0-or-later
# Completion of leeway for bash: source <(leeway completion bash)
# Mechanism names are asked of the service, with a short wait and no complaint.

_leeway_words() {
  mapfile -t COMPREPLY < <(compgen -W "$1" -- "$cur")
}

# Names of the catalog; the options typed so far that say which service is meant are kept.
_leeway_mechanisms() {
  local i names
  local -a to=()
  for ((i = 1; i < COMP_CWORD; i++)); do
    case ${COMP_WORDS[i]} in
      --server | --token-file) to+=("${COMP_WORDS[i]}" "$(_leeway_value $((i + 1)))") ;;
    esac
  done
  names=$("${COMP_WORDS[0]}" list --json --timeout 1 "${to[@]}" 2>/dev/null |
    grep -o '"mechanism":[ ]*"[a-z0-9-]*"' | sed 's/.*"\([a-z0-9-]*\)"$/\1/')
  _leeway_words "$names"
}

# The value that begins at word $1: bash cuts words at ':' and '='.
_leeway_value() {
  local i=$1 value=${COMP_WORDS[$1]:-}
  while [[ $((i + 1)) -lt $COMP_CWORD && ${COMP_WORDS[i + 1]} == ':' ]]; do
    value+=${COMP_WORDS[i + 1]}${COMP_WORDS[i + 2]:-}
    i=$((i + 2))
  done
  printf '%s' "$value"
}

_leeway_files() {
  mapfile -t COMPREPLY < <(compgen -f -- "$cur")
  compopt -o filenames 2>/dev/null
}

_leeway() {
  local cur=${COMP_WORDS[COMP_CWORD]}
  local previous=${COMP_WORDS[COMP_CWORD - 1]}
  local commands="load list show report history publish withdraw ask path travel difference health
    about replay completion help"
  local everywhere="--server --token-file --timeout --json --help --version"
  local command="" kind="" i count=0 skip=0
  COMPREPLY=()

  # The command, the kind of question and how many words follow, options left out.
  for ((i = 1; i < COMP_CWORD; i++)); do
    if ((skip > 0)); then
      skip=$((skip - 1))
      continue
    fi
    case ${COMP_WORDS[i]} in
      --json | --help | --version | --all | --distance | --certificate | --ok-any | --update | -h) ;;
      --*) skip=1 ;;
      : | =) skip=1 ;;
      *)
        if [[ -z $command ]]; then
          command=${COMP_WORDS[i]}
        else
          count=$((count + 1))
          [[ $command == ask && $count -eq 1 ]] && kind=${COMP_WORDS[i]}
        fi
        ;;
    esac
  done

  case $previous in
    --token-file | --json-body | --record)
      _leeway_files
      return
      ;;
    --units)
      _leeway_words "mm,deg mm,rad m,deg m,rad"
      return
      ;;
    --orientation)
      _leeway_words "zyx quaternion rotation_vector direction rz"
      return
      ;;
    --in)
      _leeway_words "fixed tool"
      return
      ;;
    --mechanism)
      _leeway_mechanisms
      return
      ;;
    --server | --timeout | --accept | --reason | --mode | --near | --from | --tool | --revision | \
      --margin-min | --point | --budget | --timeout-ms | --reach | --ref | --expect | --check | --ignore | --tolerance)
      return
      ;;
  esac

  if [[ -z $command ]]; then
    if [[ $cur == -* ]]; then
      _leeway_words "$everywhere"
    else
      _leeway_words "$commands"
    fi
    return
  fi

  if [[ $cur == -* ]]; then
    case $command in
      publish) _leeway_words "--accept --reason $everywhere" ;;
      withdraw) _leeway_words "--reason $everywhere" ;;
      ask) _leeway_words "--mode --near --from --tool --revision --margin-min --units --orientation
        --all --point --in --distance --budget --timeout-ms --ref --expect --json-body --record
        --ok-any $everywhere" ;;
      path) _leeway_words "--from --near --tool --revision --margin-min --units --orientation
        --budget --timeout-ms --certificate --ref --expect --record --ok-any $everywhere" ;;
      travel) _leeway_words "--mode --near --tool --revision --margin-min --units --orientation
        --reach --budget --timeout-ms --ref --expect --record --ok-any $everywhere" ;;
      replay) _leeway_words "--revision --mechanism --check --ignore --tolerance --update
        $everywhere" ;;
      *) _leeway_words "$everywhere" ;;
    esac
    return
  fi

  case $command in
    load) _leeway_files ;;
    replay) ((count == 0)) && _leeway_files ;;
    show | report | history | publish | withdraw | difference)
      ((count == 0)) && _leeway_mechanisms
      ;;
    ask)
      if ((count == 0)); then
        _leeway_words "inverse forward jacobian margin reach free-travel"
      elif ((count == 1)); then
        _leeway_mechanisms
      else
        case $kind in
          forward) _leeway_words "near." ;;
          reach) _leeway_words "x= y= z= rz= yaw= pitch= roll= qw= qx= qy= qz= joint. from." ;;
          *) _leeway_words "x= y= z= rz= yaw= pitch= roll= qw= qx= qy= qz= joint. near." ;;
        esac
        compopt -o nospace 2>/dev/null
      fi
      ;;
    path)
      if ((count == 0)); then
        _leeway_mechanisms
      elif ((count == 1)); then
        _leeway_files
      else
        _leeway_words "from."
        compopt -o nospace 2>/dev/null
      fi
      ;;
    travel)
      if ((count == 0)); then
        _leeway_mechanisms
      else
        _leeway_words "x= y= z= rz= yaw= pitch= roll= qw= qx= qy= qz= joint. near."
        compopt -o nospace 2>/dev/null
      fi
      ;;
    completion) ((count == 0)) && _leeway_words "bash" ;;
    help) ((count == 0)) && _leeway_words "$commands" ;;
  esac
  return 0
}

complete -F _leeway leeway
