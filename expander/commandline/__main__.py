from expander.commandline.main import main

main()
