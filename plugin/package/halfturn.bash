# SPDX-License-Identifier: Apache-2.0
# Completion of halfturn's commands and options for bash.
_halfturn() {
  local current=${COMP_WORDS[COMP_CWORD]} previous=${COMP_WORDS[COMP_CWORD - 1]} command=${COMP_WORDS[1]} words=
  COMPREPLY=()
  if ((COMP_CWORD == 1)); then
    words="serve fit intensity drift rehearse status check --help --version"
    mapfile -t COMPREPLY < <(compgen -W "$words" -- "$current")
    return
  fi
  case $previous in
    --config | --log | --csv)
      compopt -o filenames
      mapfile -t COMPREPLY < <(compgen -f -- "$current")
      return
      ;;
    --transition)
      local IFS=$'\n'
      mapfile -t COMPREPLY < <(compgen -W "$(halfturn intensity --list 2>/dev/null | sed 's/  .*//')" -- "$current")
      ((${#COMPREPLY[@]})) && mapfile -t COMPREPLY < <(printf '%q\n' "${COMPREPLY[@]}")
      return
      ;;
    --drive | --pulse | --endpoint | --since | --until | --starts-at | --threads | --timeout-s | --hours | --seed | --shots | \
      --flop-every-s | --line-every-s | --flop-points | --line-points | --rabi-hz | --intensity-w-m2 | --power-w | --waist-m)
      return
      ;;
  esac
  case $command in
    serve) words="--config --threads --quiet --verbose --help" ;;
    fit) words="--config --drive --together --json --help" ;;
    intensity) words="--transition --rabi-hz --intensity-w-m2 --power-w --waist-m --json --list --help" ;;
    drift) words="--log --drive --since --until --csv --json --help" ;;
    rehearse)
      words="--drive --endpoint --timeout-s --pulse --hours --seed --starts-at --flop-every-s --line-every-s --shots
        --flop-points --line-points --rabi-hz --json --help"
      ;;
    status) words="--endpoint --timeout-s --json --help" ;;
    check) words="--help" ;;
  esac
  if [[ $current == -* || ($command != fit && $command != check) ]]; then
    mapfile -t COMPREPLY < <(compgen -W "$words" -- "$current")
  else
    compopt -o filenames
    mapfile -t COMPREPLY < <(compgen -f -- "$current")
  fi
}
complete -F _halfturn halfturn
