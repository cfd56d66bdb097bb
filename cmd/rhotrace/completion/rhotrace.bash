# Completion of rhotrace's command lines for bash.
_rhotrace_complete() {
    local IFS=$'\n' words=() n=0 i word previous="" last kept
    # bash cuts words at "=" and ":"; put them together again.
    for ((i = 1; i <= COMP_CWORD; i++)); do
        word=${COMP_WORDS[i]}
        if ((n > 0)) && [[ $word == [=:]* || $previous == *[=:] ]]; then
            words[n - 1]+=$word
        else
            words[n]=$word
            ((n++))
        fi
        previous=$word
    done
    last=${words[n - 1]}
    COMPREPLY=($("${COMP_WORDS[0]}" offer "${words[@]}" 2>/dev/null))
    # The parts before the one at the cursor stand on the line already.
    kept=$last
    [[ $word == [=:] ]] || kept=${last%"$word"}
    COMPREPLY=("${COMPREPLY[@]#"$kept"}")
    if [[ ${COMPREPLY[0]-} == *= ]]; then
        compopt -o nospace 2>/dev/null
    fi
}
complete -o default -F _rhotrace_complete rhotrace
