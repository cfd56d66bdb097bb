# Completion of rhotrace's command lines for fish.
function __rhotrace_offer
    set -l words (commandline -opc) (commandline -ct)
    set -l offered (command $words[1] offer $words[2..-1] 2>/dev/null)
    if test (count $offered) -gt 0
        printf '%s\n' $offered
    else
        __fish_complete_path (commandline -ct)
    end
end
complete -c rhotrace -f -a '(__rhotrace_offer)'
