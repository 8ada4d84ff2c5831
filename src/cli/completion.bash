# twinhorizon: completion for bash. The words come from the program's own help.
_twinhorizon() {
    local word=${COMP_WORDS[COMP_CWORD]} before=${COMP_WORDS[COMP_CWORD - 1]}
    local program=${COMP_WORDS[0]} command=${COMP_WORDS[1]}

    if [ "$COMP_CWORD" -eq 1 ]; then
        mapfile -t COMPREPLY < <(compgen -W "--help --version --case-manual $("$program" --help 2>/dev/null |
            sed -n 's/^  twinhorizon \([a-z]*\) .*\.\.\. .*/\1/p')" -- "$word")
        return
    fi
    case $before in
    --set | --threads | --orders | --samples | --upto | --part) return ;;
    esac
    if [[ $word == -* ]]; then
        mapfile -t COMPREPLY < <(compgen -W "--help $("$program" "$command" --help 2>/dev/null |
            sed -n 's/^  \(--[a-z-]*\).*/\1/p')" -- "$word")
    else
        mapfile -t COMPREPLY < <(compgen -f -- "$word")
    fi
}
complete -o filenames -F _twinhorizon twinhorizon
