# Completion of rhotrace's command lines for bash.
_rhotrace_complete() {
    local IFS=$'\n' words=() word i
    # bash cuts words at "=" and ":"; put them together again.
    for ((i = 1; i <= COMP_CWORD; i++)); do
        word=${COMP_WORDS[i]}
        if [[ $word == [=:]* && ${#words[@]} -gt 0 || ${words[-1]-} == *[=:] ]]; then
            words[-1]+=$word
        else
            words+=("$word")
        fi
    done
    local last=${words[-1]}
    COMPREPLY=($("${COMP_WORDS[0]}" offer "${words[@]}" 2>/dev/null))
    # What bash has cut off stands on the line already.
    local kept=${last%"${COMP_WORDS[COMP_CWORD]}"}
    [[ ${COMP_WORDS[COMP_CWORD]} == [=:] ]] && kept=$last
    COMPREPLY=("${COMPREPLY[@]#"$kept"}")
    if [[ ${#COMPREPLY[@]} -gt 0 && ${COMPREPLY[0]} == *= ]]; then
        compopt -o nospace
    fi
}
complete -o default -F _rhotrace_complete rhotrace
